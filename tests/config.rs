//! Configurations: the shipped ones are sound, the reference is the parser's own table, and every mistake is told where
//! it stands.
#![expect(clippy::unwrap_used, reason = "a test says what went wrong by stopping")]

use gripline::config::keys::{KEYS, Kind, reference};
use gripline::config::{EXAMPLE, parse};

fn shipped() -> Vec<(String, String)> {
    let mut all: Vec<_> = std::fs::read_dir(concat!(env!("CARGO_MANIFEST_DIR"), "/config"))
        .unwrap()
        .map(|it| it.unwrap().path())
        .filter(|it| it.extension().is_some_and(|it| it == "toml"))
        .map(|it| (it.display().to_string(), std::fs::read_to_string(&it).unwrap()))
        .collect();
    all.sort();
    all
}

#[test]
fn the_shipped_configurations_have_no_mistake_and_no_oddity() {
    let all = shipped();
    assert_eq!(all.len(), 3);
    for (name, text) in all {
        match parse(&text, &name) {
            Ok((plan, warnings)) => {
                assert!(warnings.is_empty(), "{name}: {}", warnings[0]);
                assert!(plan.wheels.len() >= 3);
            }
            Err(mistakes) => panic!("{name}: {}", mistakes[0]),
        }
    }
}

/// The example with one line replaced: (what it was, what it becomes, line of the mistake counted from that line,
/// words that must be told).
#[test]
fn each_mistake_is_told_at_its_line_with_the_reason() {
    let cases = [
        ("radius_m = 0.05\n", "radius_m = 0.0\n", "`radius_m` cannot be 0.0"),
        ("radius_m = 0.05\n", "radius_m = nan\n", "`radius_m` cannot be nan"),
        ("radius_m = 0.05\n", "radius_m = inf\n", "`radius_m` cannot be inf"),
        ("radius_m = 0.05\n", "radius_m = \"5 cm\"\n", "it must be 0.001 to 5 m"),
        ("roller_deg = -45.0\n", "roller_deg = -89.9\n", "`roller_deg` cannot be -89.9"),
        ("channel = 1\n", "channel = 0\n", "share channel 0"),
        ("channel = 1\n", "channel = 4\n", "channels are 0 to 3"),
        ("link = \"base\"\n", "link = \"bass\"\n", "there is no link \"bass\""),
        ("travel_m_s = 0.6\n", "travel_m_s = 6.0\n", "faster than the wheels can turn"),
        ("travel_m_s = 0.6\n", "travel_m_s = 0.2\n", "must be faster than"),
        ("turn_rad_s = 1.2\n", "turn_rad_s = 12.0\n", "grip_m_s2"),
        ("speed_up_m_s2 = 0.8\n", "speed_up_m_s2 = 40.0\n", "`speed_up_m_s2` = 40 m/s^2 cannot be"),
        ("speed_lsb_urad_s = 1000\n", "speed_lsb_urad_s = 500\n", "32767"),
        ("speed_lsb_urad_s = 1000\n", "speed_lsb_urad_s = 100000\n", "slowest pace"),
        ("valid_ms = 100 ", "valid_ms = 9 ", "shorter than two ticks"),
        ("baud = 460800\n", "baud = 38400\n", "do not fit 38400 bit/s"),
        ("smoothing_s = 0.1\n", "smoothing_s = 3.0\n", "too long"),
        ("smoothing_s = 0.1\n", "smothing_s = 0.1\n", "did you mean `smoothing_s`?"),
        ("[bay]\n", "[bey]\n", "did you mean `bay`?"),
        ("name = \"front right\"\n", "name = \"front left\"\n", "two wheels \"front left\""),
        ("clear_m = 3.0 ", "clear_m = true ", "`clear_m` cannot be true"),
        ("clear_m = 3.0 ", "clear_m = = 1.5 ", "broken TOML"),
        ("max_rad_s2 = 120.0\n", "max_rad_s2 = 20.0\n", "cannot"),
    ];
    for (was, becomes, words) in cases {
        let at = EXAMPLE.find(was).unwrap_or_else(|| panic!("{was:?} is not in the example"));
        let line = EXAMPLE[..at].matches('\n').count() + 1;
        let text = EXAMPLE.replacen(was, becomes, 1);
        let mistakes = parse(&text, "cart.toml").expect_err(becomes);
        let told: Vec<String> = mistakes.iter().map(ToString::to_string).collect();
        let found = mistakes.iter().zip(&told).any(|(it, told)| {
            // Where the mistake lies between two tables it may be told at either.
            let near = it.line == line || words.contains("32767") || words.contains("cannot") && it.line != 0;
            near && told.contains(words) && told.contains('^')
        });
        assert!(found, "{becomes:?} at line {line}, expected {words:?}, got:\n{}", told.join("\n"));
    }
}

#[test]
fn all_mistakes_come_in_one_go_in_the_order_of_the_file() {
    let text = EXAMPLE
        .replacen("radius_m = 0.05\n", "radius_m = -1\n", 1)
        .replacen("channel = 2\n", "channel = 77\n", 1)
        .replacen("travel_m_s = 0.25\n", "travel = 0.25\n", 1)
        .replacen("grip_m_s2 = 1.2\n", "grip_m_s2 = 1e300\n", 1);
    let mistakes = parse(&text, "cart.toml").unwrap_err();
    assert!(mistakes.len() >= 5, "{mistakes:#?}");
    assert!(mistakes.windows(2).all(|it| it[0].line <= it[1].line));
}

#[test]
fn wheels_that_cannot_make_a_motion_are_refused_with_the_motion() {
    // All rollers parallel: sideways along them turns no wheel.
    let text = EXAMPLE
        .replace("roller_deg = -45.0", "roller_deg = 0.0")
        .replace("roller_deg = 45.0", "roller_deg = 0.0");
    let mistakes = parse(&text, "cart.toml").unwrap_err();
    let told = mistakes.iter().map(ToString::to_string).collect::<String>();
    assert!(told.contains("travel along 90.0 degrees turns no wheel"), "{told}");
}

#[test]
fn a_link_that_no_wheel_uses_is_refused() {
    let text = format!(
        "{EXAMPLE}\n[[link]]\nname = \"spare\"\nport = \"/dev/ttyUSB7\"\nbaud = 115200\nexpect = \"x\"\nchannels = 1\n\
         speed_lsb_urad_s = 1000\nangle_lsb_urad = 500\n"
    );
    let told = parse(&text, "cart.toml").unwrap_err()[0].to_string();
    assert!(told.contains("no wheel uses link \"spare\""), "{told}");
}

#[test]
fn nothing_and_garbage_are_refused_without_a_panic() {
    for text in [
        "",
        "\0",
        "[",
        "wheel = 3",
        "[[base]]",
        "é = \"",
        "[base]\nname = \"\u{202e}\"\n",
        "a.b.c = {x=[1,{y=2}]}",
    ] {
        assert!(parse(text, "x.toml").is_err(), "{text:?}");
    }
}

/// Every key of the reference with a default can be written out with that default, and changes nothing.
#[test]
fn the_reference_and_the_parser_are_one() {
    let printed = reference();
    let plain = parse(EXAMPLE, "x").unwrap().0;
    for key in KEYS {
        assert!(printed.contains(key.name), "{} is not printed", key.name);
        let Some(default) = key.default.filter(|it| !it.is_empty()) else { continue };
        let value = match key.kind {
            Kind::Number(..) | Kind::Whole(..) | Kind::Pair(..) | Kind::Flag => default.to_owned(),
            Kind::Text(_) | Kind::Word(_) | Kind::Button | Kind::Axis => format!("\"{default}\""),
        };
        let header = ["wheel", "link", "pace"].contains(&key.table);
        let table = if header { format!("[[{}]]", key.table) } else { format!("[{}]", key.table) };
        let section = EXAMPLE.find(&table).map(|at| &EXAMPLE[at + table.len()..]);
        let given = section.is_some_and(|it| {
            let end = it.find("\n[").unwrap_or(it.len());
            it[..end].lines().any(|line| line.trim_start().starts_with(&format!("{} =", key.name)))
        });
        if given {
            continue;
        }
        let text = if section.is_some() {
            EXAMPLE.replacen(&table, &format!("{table}\n{} = {value}", key.name), 1)
        } else {
            format!("{EXAMPLE}\n{table}\n{} = {value}\n", key.name)
        };
        match parse(&text, "x") {
            Ok((plan, _)) => {
                let mut plan = plan;
                plan.text.clone_from(&plain.text);
                assert_eq!(format!("{plan:?}"), format!("{plain:?}"), "{} = {value}", key.name);
            }
            Err(mistakes) => panic!("{} = {value}: {}", key.name, mistakes[0]),
        }
    }
}
