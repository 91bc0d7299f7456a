//! `gripline drill` as its user runs it: every fault on the stand-in, a miss that is called one, a real base's way.

#![expect(clippy::unwrap_used, clippy::panic, reason = "tests: a surprise is a failure")]

use std::path::Path;
use std::process::{Command, Stdio};

use serde_json::Value;

const GRIPLINE: &str = env!("CARGO_BIN_EXE_gripline");
const EXAMPLE: &str = include_str!("../config/four-mecanum.toml");

/// The example; its stand-in's wheels lag by 30 ms and react after 4 ms, which the budget must count with.
fn config(dir: &Path) {
    write(dir, &[("driver_ms = 35.0", "driver_ms = 50.0")]);
}

fn write(dir: &Path, changes: &[(&str, &str)]) {
    let text = changes.iter().fold(EXAMPLE.to_owned(), |text, (from, to)| {
        assert!(text.contains(from), "no {from:?} in the example");
        text.replace(from, to)
    });
    std::fs::write(dir.join("cart.toml"), text).unwrap();
}

fn drill(dir: &Path, arguments: &[&str]) -> (Option<i32>, Value, String) {
    let out = Command::new(GRIPLINE)
        .args(["drill", "cart.toml", "--json"])
        .args(arguments)
        .current_dir(dir)
        .stdin(Stdio::null())
        .output()
        .unwrap();
    let said = String::from_utf8_lossy(&out.stderr).into_owned();
    let value = serde_json::from_slice(&out.stdout)
        .unwrap_or_else(|it| panic!("{it}: {}{said}", String::from_utf8_lossy(&out.stdout)));
    (out.status.code(), value, said)
}

/// What must come of each fault: the causes that may be named, or none where the drive goes on.
const EXPECTED: [(&str, &[&str]); 28] = [
    ("torque-off", &["stop-pad"]),
    ("hold-released", &["release"]),
    ("stop-button", &["stop-pad"]),
    ("console-stop", &["stop-console"]),
    ("pad-unplugged", &["pad-gone"]),
    ("pad-silent", &["pad-quiet"]),
    ("line-cut", &["feedback-quiet", "not-heard"]),
    ("line-cut-to-drivers", &["not-heard", "driver-says"]),
    ("line-cut-from-drivers", &["feedback-quiet", "not-heard"]),
    ("port-blocked", &["not-heard", "driver-says", "write-fails"]),
    ("bit-errors-1e-4", &["", "not-heard", "feedback-quiet", "driver-says"]),
    ("bit-errors-1e-3", &["", "not-heard", "feedback-quiet", "driver-says"]),
    ("bit-errors-1e-2", &["not-heard", "feedback-quiet", "driver-says"]),
    ("driver-restart", &["driver-says"]),
    ("driver-fault", &["driver-says"]),
    ("stop-input", &["stop-input"]),
    ("wheel-stuck", &["not-following"]),
    ("wheel-runaway", &["runaway"]),
    ("encoder-dead", &["not-following"]),
    ("skid", &["not-following", "skid"]),
    ("tick-hung", &["late-tick", "no-tick"]),
    ("killed", &[""]),
    ("suspended", &["late-tick", "no-tick"]),
    ("terminated", &["quit"]),
    ("disk-full", &[""]),
    ("console-flooded", &[""]),
    ("clock-stepped", &[""]),
    ("second-drive", &[""]),
];

/// Faults whose standstill the feedback shows, and those whose base never stops.
const UNSEEN: [&str; 4] = ["line-cut", "line-cut-from-drivers", "suspended", "bit-errors-1e-2"];

fn holds(row: &Value) {
    let name = row["fault"].as_str().unwrap();
    let (_, causes) = EXPECTED.iter().find(|it| it.0 == name).unwrap();
    if row["ok"].is_null() {
        // No right to step the clock, say, or a machine that is busy with other things.
        assert!(!row["note"].as_str().unwrap().is_empty(), "{row}");
        eprintln!("SKIPPED {name}: {}", row["note"]);
        return;
    }
    assert_eq!(row["ok"], true, "{row:#}");
    assert!(causes.contains(&row["cause"].as_str().unwrap_or("")), "{row:#}");
    if row["budget_s"].is_null() {
        assert!(causes.contains(&""), "{row:#}");
        return;
    }
    assert!(row["distance_m"].as_f64().unwrap() <= row["budget_m"].as_f64().unwrap(), "{row:#}");
    match row["standstill_s"].as_f64() {
        Some(seconds) => assert!(seconds <= row["budget_s"].as_f64().unwrap(), "{row:#}"),
        None => assert!(UNSEEN.contains(&name), "{row:#}"),
    }
}

#[test]
fn every_fault_stops_the_base_within_its_budget() {
    // Each waits most of the time: several at once, each with its own stand-in.
    let parts: Vec<&[(&str, &[&str])]> = EXPECTED.chunks(14).collect();
    std::thread::scope(|scope| {
        for part in parts {
            scope.spawn(move || {
                let dir = tempfile::tempdir().unwrap();
                config(dir.path());
                let mut arguments = vec!["--standin", "--html", "page.html"];
                arguments.extend(part.iter().flat_map(|it| ["--only", it.0]));
                let (exit, report, said) = drill(dir.path(), &arguments);
                let rows = report["drills"].as_array().unwrap();
                assert_eq!(rows.len(), part.len());
                rows.iter().for_each(holds);
                assert!(exit == Some(0) || !report["too_late"].is_null(), "{said}");
                let page = std::fs::read_to_string(dir.path().join("page.html")).unwrap();
                assert!(page.contains("<svg") && part.iter().all(|it| page.contains(it.0)));
                assert!(!page.contains("http://") || !page.contains("<script"), "it is readable offline");
            });
        }
    });
}

/// The same numbers, but drivers that are said to be quicker than they are: that must be called a miss.
#[test]
fn a_base_that_stops_later_than_its_budget_is_a_miss() {
    let dir = tempfile::tempdir().unwrap();
    write(dir.path(), &[("driver_ms = 35.0", "driver_ms = 0.0"), ("stop_m_s2 = 1.5", "stop_m_s2 = 4.0")]);
    let (exit, report, _) = drill(dir.path(), &["--standin", "--only", "stop-button"]);
    let row = &report["drills"][0];
    if exit == Some(3) {
        eprintln!("SKIPPED: {}", report["too_late"]);
        return;
    }
    assert_eq!(
        (exit, &row["ok"], &report["ok"]),
        (Some(1), &Value::Bool(false), &Value::Bool(false)),
        "{row:#}"
    );
    assert!(row["note"].as_str().unwrap().contains("than its budget"), "{row:#}");
}

/// Without --standin somebody drives: here a script on simulated drivers that a stand-in serves.
#[test]
fn a_base_is_drilled_by_whoever_drives_it() {
    let dir = tempfile::tempdir().unwrap();
    config(dir.path());
    let mut standin = Command::new(GRIPLINE)
        .args(["standin", "cart.toml", "--quiet", "--until-eof", "--link-dir", "links"])
        .current_dir(dir.path())
        .stdin(Stdio::piped())
        .stdout(Stdio::null())
        .spawn()
        .unwrap();
    while !dir.path().join("links/base").exists() {
        assert!(standin.try_wait().unwrap().is_none(), "the stand-in ended");
        gripline::sys::clock::sleep_ms(5);
    }
    let hands = "0.7,Start,1\n0.8,Start,0\n1.0,RightTrigger2,1\n1.2,LeftStickY,1\n9.0,LeftStickY,0\n";
    std::fs::write(dir.path().join("hands.csv"), hands).unwrap();
    let with =
        ["--port", "links/base", "--hands", "hands.csv", "--only", "console-stop", "--only", "wheel-stuck"];
    let (exit, report, said) = drill(dir.path(), &with);
    let row = &report["drills"][0];
    if exit == Some(3) {
        eprintln!("SKIPPED: {}", report["too_late"]);
    } else {
        assert_eq!((exit, &row["ok"]), (Some(0), &Value::Bool(true)), "{row:#} {said}");
        assert_eq!(row["cause"], "stop-console");
    }
    let alone = &report["drills"][1];
    assert!(alone["ok"].is_null() && alone["note"] == "for the stand-in alone", "{alone:#}");
    drop(standin.stdin.take());
    assert!(standin.wait().unwrap().success());
}

#[test]
fn what_cannot_be_drilled_is_said_in_one_line() {
    let dir = tempfile::tempdir().unwrap();
    config(dir.path());
    for (arguments, told) in [
        (&["--standin", "--only", "flood"][..], "--only flood: there is no such fault"),
        (&["--standin", "--pace", "gallop"], "--pace gallop: no such pace; there are creep"),
        (&["--pace", "walk", "--hands", "x.csv"], "pace 'walk' is not the slowest"),
        (&[], "a base is drilled with somebody at the terminal"),
        (&["--standin", "--html", "no/page.html"], "cannot write no/page.html"),
        (&["--standin", "--hands", "x.csv"], "cannot be used with"),
    ] {
        let out = Command::new(GRIPLINE)
            .args(["drill", "cart.toml"])
            .args(arguments)
            .current_dir(dir.path())
            .stdin(Stdio::null())
            .output()
            .unwrap();
        let said = String::from_utf8_lossy(&out.stderr).into_owned();
        assert_eq!(out.status.code(), Some(2), "{arguments:?}: {said}");
        assert!(said.contains(told) && said.lines().count() == 1, "{arguments:?}: {said}");
    }
}

/// The drivers' side in C, compiled as firmware is, at the other end of a pseudo-terminal: driven, stopped, killed,
/// suspended, and held against the same budget.
#[test]
fn the_drivers_in_c_bear_the_drill() {
    let dir = tempfile::tempdir().unwrap();
    config(dir.path());
    let compiled = Command::new("gcc")
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .args(["-std=c99", "-D_XOPEN_SOURCE=600", "-Wall", "-Wextra", "-Werror", "-pedantic", "-O2", "-o"])
        .arg(dir.path().join("host"))
        .args(["src/wire/c/host.c", "src/wire/c/gripline.c"])
        .output()
        .unwrap_or_else(|why| panic!("gcc is needed for this test: {why}"));
    assert!(compiled.status.success(), "{}", String::from_utf8_lossy(&compiled.stderr));
    let mut host = Command::new(dir.path().join("host"))
        .args(["--pty", "cart", "tray cart drivers", "4", "1000", "500"])
        .current_dir(dir.path())
        .stdin(Stdio::piped())
        .spawn()
        .unwrap();
    while !dir.path().join("cart").exists() {
        assert!(host.try_wait().unwrap().is_none(), "the drivers in C ended");
        gripline::sys::clock::sleep_ms(5);
    }
    // After a fault that latches them they are cleared by whoever drives next.
    let hands = "0.5,Select,1\n1.9,Select,0\n2.1,Start,1\n2.2,Start,0\n2.4,RightTrigger2,1\n2.6,LeftStickY,1\n14.0,LeftStickY,0\n";
    std::fs::write(dir.path().join("hands.csv"), hands).unwrap();
    let mut with = vec!["--port", "cart", "--hands", "hands.csv"];
    with.extend(["console-stop", "killed", "suspended", "terminated"].iter().flat_map(|it| ["--only", it]));
    let (exit, report, said) = drill(dir.path(), &with);
    let rows = report["drills"].as_array().unwrap();
    assert_eq!(rows.len(), 4, "{said}");
    rows.iter().for_each(holds);
    assert!(exit == Some(0) || !report["too_late"].is_null(), "{said}");
    assert!(rows.iter().any(|it| it["ok"] == true), "{report:#}");
    drop(host.stdin.take());
    assert!(host.wait().unwrap().success());
}
