//! A corpus of bad configurations: `config/mistakes.txt` changes `config/sound.toml` a little in each case and says all
//! that must be told about it, with its place.
//!
//! ```text
//! ## what the case is about
//! -a line of the sound file, replaced where it comes first by
//! +the line after it (nothing: taken out)
//! ++a line added at the end
//! =12:8 words that a mistake at that line and column holds
//! ~12:8 the same for an oddity in a file that is taken
//! ```
#![expect(clippy::unwrap_used, reason = "a test says what went wrong by stopping")]

use gripline::config::{Mistake, parse};

const SOUND: &str = include_str!("config/sound.toml");
const MISTAKES: &str = include_str!("config/mistakes.txt");

struct Case<'a> {
    about: &'a str,
    text: String,
    wrong: Vec<&'a str>,
    odd: Vec<&'a str>,
}

fn cases() -> Vec<Case<'static>> {
    let mut all = Vec::new();
    for case in MISTAKES.split("\n## ").skip(1) {
        let (about, rest) = case.split_once('\n').unwrap();
        let (mut text, mut was, mut becomes) = (SOUND.to_owned(), String::new(), String::new());
        let (mut wrong, mut odd) = (Vec::new(), Vec::new());
        let mut replace = |was: &mut String, becomes: &mut String| {
            if !was.is_empty() {
                assert!(text.contains(was.as_str()), "{about}: the sound file has no {was:?}");
                text = text.replacen(was.as_str(), becomes, 1);
            }
            was.clear();
            becomes.clear();
        };
        let mut end = String::new();
        for line in rest.lines().filter(|it| !it.is_empty()) {
            match (line.split_at(1), line.strip_prefix("++")) {
                (_, Some(added)) => end += &format!("{added}\n"),
                (("-", line), None) => {
                    if !becomes.is_empty() {
                        replace(&mut was, &mut becomes);
                    }
                    was += &format!("{line}\n");
                }
                (("+", line), None) => becomes += &format!("{line}\n"),
                (("=", words), None) => wrong.push(words),
                (("~", words), None) => odd.push(words),
                _ => unreachable!("{about}: what is {line:?}"),
            }
        }
        replace(&mut was, &mut becomes);
        text += &end;
        all.push(Case { about, text, wrong, odd });
    }
    all
}

fn compare(case: &Case<'_>, told: &[Mistake], expected: &[&str]) {
    let shown: String = told.iter().map(|it| format!("{it}\n")).collect();
    let fits = told.len() == expected.len()
        && told.iter().zip(expected).all(|(it, expected)| {
            let (place, words) = expected.split_once(' ').unwrap();
            place == format!("{}:{}", it.line, it.column) && it.what.contains(words)
        });
    assert!(fits, "{}: expected {expected:#?}, and this was told:\n{shown}", case.about);
}

#[test]
fn the_sound_file_is_sound() {
    let (plan, odd) = parse(SOUND, "sound.toml").unwrap();
    assert_eq!((plan.wheels.len(), plan.links.len(), odd.len()), (4, 2, 0));
}

#[test]
fn every_mistake_is_told_at_its_place_and_nothing_else() {
    let all = cases();
    assert!(all.len() > 60, "only {} cases were read", all.len());
    for case in &all {
        match parse(&case.text, "trial.toml") {
            Ok((_, odd)) => {
                compare(case, &[], &case.wrong);
                compare(case, &odd, &case.odd);
                assert!(!case.odd.is_empty(), "{}: nothing was told", case.about);
            }
            Err(mistakes) => compare(case, &mistakes, &case.wrong),
        }
    }
}

#[test]
fn the_caret_stands_under_what_it_means() {
    for case in cases() {
        let Err(mistakes) = parse(&case.text, "trial.toml") else { continue };
        for mistake in mistakes {
            let told = mistake.to_string();
            let lines: Vec<&str> = told.lines().collect();
            let [first, shown, caret] = lines.as_slice() else { panic!("{told}") };
            assert!(
                first.starts_with(&format!("trial.toml:{}:{}: ", mistake.line, mistake.column)),
                "{told}"
            );
            let text = case.text.lines().nth(mistake.line - 1).unwrap_or("");
            assert_eq!(shown.split_once("| ").unwrap().1, text, "{told}");
            assert_eq!(caret.find('^'), Some("      | ".len() + mistake.column - 1), "{told}");
            // A caret may stand just behind the line, where something is missing.
            assert!(caret.len() <= shown.len() + 1, "{told}");
        }
    }
}

/// The text's first table of a name, with its number in `{}`, so many times.
fn repeated(table: &str, name: &str, times: usize) -> String {
    let header = format!("[[{table}]]\n");
    let at = SOUND.find(&header).unwrap();
    let end = at + SOUND[at..].find("\n\n").unwrap() + 2;
    let one = &SOUND[at..end];
    let many: String =
        (0..times).map(|it| one.replacen(&format!("\"{name}\""), &format!("\"{name} {it}\""), 1)).collect();
    SOUND.replace(one, &many)
}

#[test]
fn more_than_the_program_takes_is_refused_at_the_first_too_many() {
    let cases = [
        ("wheel", "a", 30, "33 wheels are more than the 32"),
        ("link", "one", 8, "9 links are more than the 8"),
    ];
    for (table, name, times, words) in cases {
        let mistakes = parse(&repeated(table, name, times), "trial.toml").unwrap_err();
        assert!(mistakes.iter().any(|it| it.what.contains(words)), "{words}: {mistakes:#?}");
    }
    let paces: String = (0..40)
        .map(|it| format!("[[pace]]\nname = \"p{it}\"\ntravel_m_s = 0.6{it:02}1\nturn_rad_s = 1.0\n"))
        .collect();
    let mistakes = parse(&format!("{SOUND}{paces}"), "trial.toml").unwrap_err();
    assert!(mistakes[0].what.contains("42 paces are more than the 32"), "{mistakes:#?}");
}

#[test]
fn two_wheels_are_refused_with_the_reason() {
    let second = SOUND.find("[[wheel]]\nname = \"b\"").unwrap();
    let fourth = SOUND.find("[[wheel]]\nname = \"d\"").unwrap();
    let text = format!("{}{}", &SOUND[..second], &SOUND[fourth..]);
    let mistakes = parse(&text, "trial.toml").unwrap_err();
    assert_eq!(mistakes.len(), 1, "{mistakes:#?}");
    assert!(mistakes[0].what.contains("2 wheels cannot command three motions"), "{}", mistakes[0]);
}

#[test]
fn whatever_the_bytes_there_is_an_answer_and_no_panic() {
    for text in [
        "",
        "\0",
        "[",
        "wheel = 3",
        "[[base]]",
        "é = \"",
        "[base]\nname = \"\u{202e}\"\n",
        "a.b.c = {x=[1,{y=2}]}",
        "\u{feff}",
    ] {
        assert!(parse(text, "x.toml").is_err(), "{text:?}");
    }
    // Every beginning of a file, and the file without each of its lines: nothing may panic.
    for end in (0..SOUND.len()).step_by(7) {
        let _ = parse(&SOUND[..end], "x.toml");
    }
    for line in 0..SOUND.lines().count() {
        let text: String =
            SOUND.lines().enumerate().filter(|it| it.0 != line).map(|it| format!("{}\n", it.1)).collect();
        let _ = parse(&text, "x.toml").map_err(|it| it.iter().map(ToString::to_string).collect::<String>());
    }
}
