//! The console under clients that misbehave, and the commands that speak to it.

use std::io::{BufRead, BufReader, Read, Write};
use std::os::unix::net::UnixStream;
use std::time::Duration;

use serde_json::Value;

use crate::bench::{Bench, PATIENCE, READY_AND_DRIVE, wait_for};

fn connect(bench: &Bench) -> UnixStream {
    let stream = UnixStream::connect(bench.path("gripline-tray-cart.sock")).unwrap();
    stream.set_read_timeout(Some(PATIENCE)).unwrap();
    stream
}

fn ask(stream: &mut UnixStream, line: &str) -> Value {
    writeln!(stream, "{line}").unwrap();
    let mut answer = String::new();
    BufReader::new(stream).read_line(&mut answer).unwrap();
    serde_json::from_str(&answer).unwrap()
}

#[test]
fn nonsense_is_answered_or_dropped_and_harms_nobody() {
    let bench = Bench::new();
    let _standin = bench.standin();
    let mut drive = bench.drive(&bench.hands("60,end,\n"));
    drive.says("answers as configured");
    let mut client = connect(&bench);
    for line in
        ["", "null", "{}", "[1,2", "{\"ask\":7}", "{\"ask\":\"fly\"}", "\u{7f}\u{0}", "{\"ask\":\"reset\"}"]
    {
        let answer = ask(&mut client, line);
        assert!(answer["error"].is_string(), "{line:?}: {answer}");
    }
    assert_eq!(
        ask(&mut client, "{\"ask\":\"status\"}")["phase"],
        "Parked",
        "the same client is still served"
    );
    let mut endless = connect(&bench);
    let _ = endless.write_all(&[b'x'; 5000]);
    let mut rest = Vec::new();
    // Dropped: an end, or a reset because it had not read everything.
    let _ = endless.read_to_end(&mut rest);
    assert!(rest.is_empty(), "an endless line is not answered");
    assert!(bench.phase_is("Parked"));
}

#[test]
fn a_stop_is_heard_through_hangers_flooders_and_clients_that_never_read() {
    let bench = Bench::new();
    let _standin = bench.standin();
    let mut drive = bench.drive(&bench.hands(READY_AND_DRIVE));
    drive.says("Ready -> Driving");
    // More than are served at a time: half a line, and nothing more.
    let hangers: Vec<UnixStream> = (0..40)
        .map(|_| {
            let mut it = connect(&bench);
            let _ = it.write_all(b"{\"ask\":");
            it
        })
        .collect();
    // Asks without an end and never reads.
    let mut flooder = connect(&bench);
    flooder.set_write_timeout(Some(Duration::from_millis(50))).unwrap();
    let many = "{\"ask\":\"status\"}\n".repeat(1000);
    while flooder.write_all(many.as_bytes()).is_ok() {}
    let stop = bench.gripline("stop").arg("--json").output().unwrap();
    let said: Value = serde_json::from_slice(&stop.stdout).unwrap();
    assert_eq!(said["stopped_by"], "drive", "{said} {}", String::from_utf8_lossy(&stop.stderr));
    drive.says("STOPPED: stop asked at the console");
    drop(hangers);
    drive.signal("TERM");
    assert_eq!(drive.ends().code(), Some(0));
    // None of it reached the tick: it ran on its grid, and tripped for nothing but the stop.
    let ticks = bench.ticks();
    let causes: Vec<&str> = ticks.iter().map(|it| it["cause"].as_str()).filter(|it| !it.is_empty()).collect();
    assert!(!causes.is_empty() && causes.iter().all(|it| *it == causes[0]), "{causes:?}");
}

#[test]
fn without_a_configuration_the_only_drive_is_found_and_a_dead_socket_is_none() {
    let bench = Bench::new();
    let _standin = bench.standin();
    drop(std::os::unix::net::UnixListener::bind(bench.path("gripline-long-gone.sock")).unwrap());
    let bare = |command: &str, extra: &[&str]| bench.bare(command).args(extra).output().unwrap();
    assert_eq!(bare("status", &[]).status.code(), Some(1), "nothing runs yet");
    let mut drive = bench.drive(&bench.hands(READY_AND_DRIVE));
    drive.says("Ready -> Driving");
    let status = bare("status", &["--json"]);
    let said: Value = serde_json::from_slice(&status.stdout).unwrap();
    assert_eq!(said["base"], "tray cart");
    assert_eq!(said["pid"], drive.child.id());
    assert_eq!(bare("stop", &[]).status.code(), Some(0));
    drive.says("STOPPED: stop asked at the console");
}

#[test]
fn the_console_resets_only_where_the_configuration_lets_it() {
    let bench = Bench::new();
    bench.change("reset = true", "reset = false");
    let _standin = bench.standin();
    let script = format!("{READY_AND_DRIVE}1.2,RightTrigger2,0\n1.2,LeftStickY,0\n");
    let mut drive = bench.drive(&bench.hands(&script));
    drive.says("Stopping -> Ready");
    assert!(bench.gripline("stop").status().unwrap().success());
    drive.says("STOPPED");
    wait_for("standstill", || {
        bench.status().is_some_and(|it| it["measured_rad_s"].as_array().unwrap().iter().all(|it| it == 0.0))
    });
    let reset = bench.gripline("reset").arg("--in-sight").output().unwrap();
    assert_eq!(reset.status.code(), Some(1));
    let told = String::from_utf8_lossy(&reset.stderr).into_owned();
    assert!(told.contains("reset at the pad"), "{told}");
    assert!(bench.phase_is("Tripped"));
}

#[test]
fn after_a_stop_at_the_pad_the_console_may_not_reset() {
    let bench = Bench::new();
    let _standin = bench.standin();
    let script = format!("{READY_AND_DRIVE}1.5,East,1\n1.6,East,0\n1.7,RightTrigger2,0\n1.7,LeftStickY,0\n");
    let mut drive = bench.drive(&bench.hands(&script));
    drive.says("STOPPED: stop asked at the pad");
    let mut last = String::new();
    wait_for("the reason", || {
        let reset = bench.gripline("reset").arg("--in-sight").output().unwrap();
        assert_eq!(reset.status.code(), Some(1), "reset although it was stopped at the pad");
        last = String::from_utf8_lossy(&reset.stderr).into_owned();
        last.contains("reset at the pad")
    });
    assert!(bench.phase_is("Tripped"), "{last}");
}
