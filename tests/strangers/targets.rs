//! What strangers' bytes are tried on. Each takes any bytes and holds what must hold for all of them; the coverage-guided
//! fuzzer and the tests use the same functions.

use std::path::Path;

use gripline::config::{self, Mistake};
use gripline::daemon::request::{Heard, LONGEST, Line, request};
use gripline::record::reader::Run;
use gripline::standin::hands::Script;
use gripline::wire::{
    Deframer, FromDrivers, MAX_ON_LINE, ToDrivers, emit_from_drivers, emit_to_drivers, parse_from_drivers,
    parse_to_drivers,
};

pub(crate) type Target = fn(&[u8]);

/// All of them, by the name of their corpus.
pub(crate) const TARGETS: [(&str, Target); 5] = [
    ("decoder", decoder),
    ("configuration", configuration),
    ("console", console),
    ("hands", hands),
    ("run-file", run_file),
];

/// The line's decoder, both ways: whatever is accepted is written again as the same bytes, and chunks do not matter.
pub(crate) fn decoder(data: &[u8]) {
    let mut deframer = Deframer::new();
    let mut frames = Vec::new();
    for byte in data {
        if let Some(Ok(plain)) = deframer.push(*byte) {
            frames.push(plain.to_vec());
        }
    }
    let mut room = [0; MAX_ON_LINE];
    for plain in frames {
        if let Ok((sequence, message)) = parse_to_drivers(&plain) {
            let n = emit_to_drivers(sequence, &message, &mut room);
            assert_eq!(again(&room[..n]), plain, "{message:?}");
            if let ToDrivers::Drive(drive) = &message {
                assert!(drive.speeds.len() <= 29);
            }
        }
        if let Ok((sequence, message)) = parse_from_drivers(&plain) {
            let n = emit_from_drivers(sequence, &message, &mut room);
            assert_eq!(again(&room[..n]), plain, "{message:?}");
            if let FromDrivers::Feedback(feedback) = &message {
                assert!(feedback.channels.len() <= 29);
            }
        }
    }
}

fn again(on_line: &[u8]) -> Vec<u8> {
    let mut deframer = Deframer::new();
    let mut plain = None;
    for byte in on_line {
        if let Some(Ok(it)) = deframer.push(*byte) {
            plain = Some(it.to_vec());
        }
    }
    plain.unwrap_or_default()
}

/// The configuration: a plan, or mistakes that each say something in words.
pub(crate) fn configuration(data: &[u8]) {
    let text = String::from_utf8_lossy(data);
    match config::parse(&text, "strange.toml") {
        Ok((plan, _)) => {
            assert!(plan.wheels.len() >= 3 && !plan.paces.is_empty() && !plan.links.is_empty());
        }
        Err(mistakes) => {
            assert!(!mistakes.is_empty());
            let words = |it: &Mistake| it.to_string();
            assert!(mistakes.iter().map(words).all(|it| it.starts_with("strange.toml")));
        }
    }
}

/// The console: never more than a line is kept, every line gets an answer or a refusal in one line.
pub(crate) fn console(data: &[u8]) {
    let mut line = Line::default();
    let mut since = 0;
    for byte in data {
        since += 1;
        match line.push(*byte) {
            Heard::Part => assert!(since < LONGEST),
            Heard::Whole(whole) => {
                assert!(whole.len() < LONGEST);
                if let Err(why) = request(&whole) {
                    assert!(!why.contains('\n'), "{why:?}");
                }
                since = 0;
            }
            Heard::TooLong => return,
        }
    }
}

/// The script of hands: lines in order of time, or mistakes in words.
pub(crate) fn hands(data: &[u8]) {
    let text = String::from_utf8_lossy(data);
    match Script::parse(&text) {
        Ok(script) => {
            let times = script.lines().iter().map(|it| it.at_s);
            assert!(times.clone().zip(times.skip(1)).all(|(a, b)| a <= b && a >= 0.0 && b.is_finite()));
        }
        Err(mistakes) => assert!(mistakes.iter().all(|it| !it.to_string().contains('\n'))),
    }
}

/// The run file: read to its end, with no more out of it than is in it.
pub(crate) fn run_file(data: &[u8]) {
    let Ok(mut run) = Run::read(Path::new("strange.pcapng"), Box::new(std::io::Cursor::new(data.to_vec())))
    else {
        return;
    };
    let mut items = 0;
    while run.next().is_some() {
        items += 1;
        assert!(items <= data.len(), "more packets than bytes");
    }
}
