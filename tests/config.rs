//! The shipped configurations are sound, and the printed reference is the parser's own table.

use gripline::config::keys::{AXES, BUTTONS, KEYS, Key, Kind, header, reference};
use gripline::config::{EXAMPLE, Plan, parse};
use gripline::core::budget;

const SOUND: &str = include_str!("config/sound.toml");

#[test]
fn the_shipped_configurations_have_no_mistake_and_no_oddity() {
    let mut names = Vec::new();
    for file in std::fs::read_dir(concat!(env!("CARGO_MANIFEST_DIR"), "/config")).unwrap() {
        let path = file.unwrap().path();
        if path.extension().is_none_or(|it| it != "toml") {
            continue;
        }
        let text = std::fs::read_to_string(&path).unwrap();
        let (plan, odd) = match parse(&text, &path.display().to_string()) {
            Ok(read) => read,
            Err(mistakes) => panic!("{}", mistakes[0]),
        };
        assert!(odd.is_empty(), "{}", odd[0]);
        assert_eq!(budget::warnings(&plan), Vec::<String>::new(), "{}", path.display());
        assert!(budget::paces_that_fit(&plan).into_iter().all(|fits| fits));
        names.push(path.file_name().unwrap().to_string_lossy().into_owned());
    }
    names.sort();
    assert_eq!(names, ["four-mecanum.toml", "four-omni.toml", "three-omni.toml"]);
    assert!(parse(EXAMPLE, "four-mecanum.toml").unwrap().0.wheels.len() == 4);
}

/// A file in which each key can be given another value: spare channels, and nothing else that holds it back.
fn roomy() -> String {
    SOUND.replace("channels = 2", "channels = 8")
}

/// The text with one key of the first table of its name set to a value, as it is written.
fn set(text: &str, key: &Key, value: &str) -> String {
    let (header, line) = (header(key.table), format!("{} = {value}\n", key.name));
    let Some(at) = text.find(&format!("{header}\n")) else { return format!("{text}\n{header}\n{line}") };
    let body = at + header.len() + 1;
    let end = text[body..].find("\n[").map_or(text.len(), |it| body + it + 1);
    let is_it = |it: &&str| it.split('=').next().is_some_and(|it| it.trim() == key.name);
    let rest: String = text[body..end].split_inclusive('\n').filter(|it| !is_it(it)).collect();
    format!("{}{line}{rest}{}", &text[..body], &text[end..])
}

/// Values that a key could be given, as they are written.
fn candidates(key: &Key) -> Vec<String> {
    let quoted = |it: &str| format!("\"{it}\"");
    match key.kind {
        Kind::Number(least, most) => {
            [0.003, 0.07, 0.15, 0.7, 0.9, 1.3, 2.5, 17.0, 25.0, 60.0, 101.0, 110.0, 300.0, 1500.0]
                .into_iter()
                .filter(|it| *it >= least && *it <= most)
                .map(|it| it.to_string())
                .collect()
        }
        Kind::Whole(least, most) => [5_i64, 0, 1, 9, 50, 1100, 510, 500_000]
            .into_iter()
            .filter(|it| *it >= least && *it <= most)
            .map(|it| it.to_string())
            .collect(),
        Kind::Pair(..) => vec!["[0.45, 0.41]".into(), "[0.21, 0.14]".into()],
        Kind::Text(_) => ["045e:02fd", "/dev/other", "two"].into_iter().map(quoted).collect(),
        Kind::Flag => vec!["true".into(), "false".into()],
        Kind::Word(words) => words.iter().map(|it| quoted(it)).collect(),
        Kind::Button => BUTTONS.iter().map(|it| quoted(it)).collect(),
        Kind::Axis => AXES.iter().map(|it| quoted(&format!("-{it}"))).collect(),
    }
}

/// Everything of a plan but its text.
fn shown(text: &str) -> Result<String, String> {
    parse(text, "x.toml")
        .map(|(plan, _)| format!("{:?}", Plan { text: String::new(), ..plan }))
        .map_err(|it| it[0].to_string())
}

#[test]
fn every_key_of_the_reference_is_read_and_reaches_the_plan() {
    let (printed, text) = (reference(), roomy());
    let plain = shown(&text).unwrap();
    for key in KEYS {
        assert!(printed.contains(&format!("  {} ", key.name)), "{} is not printed", key.name);
        // Names of links are said twice in a file, and a wheel that changes its link needs a free channel there.
        let base = match (key.table, key.name) {
            ("link", "name") => text.replace("link = \"one\"", "link = \"045e:02fd\""),
            ("wheel", "link") => text.replacen("channel = 0", "channel = 7", 1),
            _ => text.clone(),
        };
        let before = if base == text { plain.clone() } else { shown(&base).unwrap_or_default() };
        let tried: Vec<_> = candidates(key).iter().map(|it| shown(&set(&base, key, it))).collect();
        let reached = tried.iter().any(|it| it.as_ref().is_ok_and(|it| *it != before));
        assert!(reached, "[{}] {} reaches nothing: {tried:#?}", key.table, key.name);
    }
}

#[test]
fn a_default_written_out_changes_nothing() {
    let text = roomy();
    for key in KEYS {
        let Some(default) = key.default.filter(|it| !it.is_empty()) else { continue };
        // Left out first, for the file may say something else.
        let without = set(&text, key, "#").replacen(&format!("{} = #\n", key.name), "", 1);
        let value = match key.kind {
            Kind::Number(..) | Kind::Whole(..) | Kind::Pair(..) | Kind::Flag => default.to_owned(),
            Kind::Text(_) | Kind::Word(_) | Kind::Button | Kind::Axis => format!("\"{default}\""),
        };
        assert_eq!(shown(&set(&without, key, &value)), shown(&without), "[{}] {}", key.table, key.name);
        assert!(shown(&without).is_ok(), "[{}] {}: {:?}", key.table, key.name, shown(&without));
    }
}

#[test]
fn the_defaults_in_the_words_of_the_reference_are_those_that_are_taken() {
    let plan = parse(&roomy(), "x.toml").unwrap().0;
    let default = |table: &str, name: &str| {
        KEYS.iter().find(|it| it.table == table && it.name == name).and_then(|it| it.default).unwrap()
    };
    assert_eq!(default("loop", "rate_hz").parse(), Ok(plan.tick.rate_hz));
    assert_eq!(default("guard", "late_ms").parse(), Ok(plan.guard.late_ms));
    assert_eq!(default("link", "fifo_bytes").parse(), Ok(plan.links[0].fifo_bytes));
    assert_eq!(default("pad", "hold"), format!("{:?}", plan.pad.hold));
    assert_eq!(default("pad", "turn_left"), "-RightStickX");
    assert!(plan.pad.turn_left.inverted);
    assert_eq!(plan.guard.driver_ms, None);
    assert_eq!(plan.pad.hold_squeeze, None);
}

/// A file of something else: as many mistakes as anybody reads, the rest counted, and at once.
#[test]
fn a_file_of_something_else_is_refused_at_once() {
    let lines: String = (0..50_000).map(|it| format!("k{it} = 1\n")).collect();
    let mistakes = parse(&format!("[base]\n{lines}"), "log.toml").unwrap_err();
    assert_eq!(mistakes.len(), 100);
    assert!(mistakes[99].what.ends_with("more mistakes; mend these first)"), "{}", mistakes[99].what);
    // One that never ends, too.
    let why = gripline::config::load(std::path::Path::new("/dev/zero")).unwrap_err().to_string();
    assert!(why.contains("larger than 1 MiB"), "{why}");
}
