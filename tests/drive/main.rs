//! The built program: `drive` against the stand-in and against drivers that share no code with it, over real
//! pseudo-terminals, with real signals. Nothing here depends on speed: each step waits for what it needs.
#![expect(
    clippy::unwrap_used,
    clippy::panic,
    clippy::disallowed_methods,
    reason = "tests of a running program wait and stop by themselves"
)]

mod bench;
mod console;
#[cfg(feature = "test-faults")]
mod faults;
mod service;

use std::path::Path;
use std::process::Command;
use std::time::Duration;

use bench::{Bench, GRIPLINE, PEER, READY_AND_DRIVE, Running, peer, wait_for};

#[test]
fn a_signal_in_motion_ramps_parks_and_ends_in_order() {
    for signal in ["INT", "TERM", "HUP"] {
        let bench = Bench::new();
        let _standin = bench.standin();
        let mut drive = bench.drive(&bench.hands(READY_AND_DRIVE));
        drive.says("Ready -> Driving");
        wait_for("motion", || bench.status().is_some_and(|it| it["sent"]["x_m_s"].as_f64() > Some(0.1)));
        drive.signal(signal);
        drive.says("Driving -> Stopping");
        drive.says("Stopping -> Parked");
        assert_eq!(drive.ends().code(), Some(0), "after {signal}");
        let ticks = bench.ticks();
        assert_eq!(ticks.last().unwrap()["phase"], "Parked");
        let phases: Vec<&str> = ticks.iter().map(|it| it["phase"].as_str()).collect();
        for (tick, phase) in ticks.iter().zip(&phases) {
            let turns = (0..4).any(|i| tick[&format!("sent_{i}_counts")] != "0");
            assert!(!turns || ["Driving", "Stopping"].contains(phase), "told to turn in {phase}");
        }
        assert!(!bench.path("gripline-tray-cart.sock").exists(), "the socket was left behind");
    }
}

#[test]
fn a_second_signal_stops_at_once_but_one_that_comes_twice_is_one() {
    for patient in [false, true] {
        let bench = Bench::new();
        bench.change("stop_m_s2 = 1.5", "stop_m_s2 = 0.2");
        let _standin = bench.standin();
        let mut drive = bench.drive(&bench.hands(READY_AND_DRIVE));
        drive.says("Ready -> Driving");
        wait_for("full speed", || bench.status().is_some_and(|it| it["sent"]["x_m_s"].as_f64() > Some(0.24)));
        drive.signal("TERM");
        if patient {
            drive.signal("HUP");
            drive.says("Stopping -> Parked");
        } else {
            drive.says("Driving -> Stopping");
            std::thread::sleep(Duration::from_millis(300));
            drive.signal("TERM");
            drive.says("STOPPED: a second signal");
        }
        assert_eq!(drive.ends().code(), Some(0));
    }
}

#[test]
fn the_console_stops_at_once_and_resets_only_in_sight() {
    let bench = Bench::new();
    let _standin = bench.standin();
    let script = format!("{READY_AND_DRIVE}2.0,RightTrigger2,0\n2.0,LeftStickY,0\n");
    let mut drive = bench.drive(&bench.hands(&script));
    drive.says("Ready -> Driving");
    let stop = bench.gripline("stop").output().unwrap();
    assert_eq!(stop.status.code(), Some(0), "{}", String::from_utf8_lossy(&stop.stderr));
    drive.says("STOPPED: stop asked at the console");
    assert!(bench.phase_is("Tripped"));
    let blind = bench.gripline("reset").output().unwrap();
    assert_eq!(blind.status.code(), Some(1));
    assert!(String::from_utf8_lossy(&blind.stderr).contains("--in-sight"));
    // Refused while the hold is pressed; taken once the script has let go and the wheels stand.
    wait_for("the reset", || bench.gripline("reset").arg("--in-sight").output().unwrap().status.success());
    drive.says("Tripped -> Parked");
    assert!(bench.phase_is("Parked"), "a reset moves nothing");
    drive.signal("TERM");
    assert_eq!(drive.ends().code(), Some(0));
}

#[test]
fn a_suspended_drive_never_moves_again_by_itself() {
    let bench = Bench::new();
    let _standin = bench.standin();
    let mut drive = bench.drive(&bench.hands(READY_AND_DRIVE));
    drive.says("Ready -> Driving");
    drive.signal("STOP");
    std::thread::sleep(Duration::from_millis(1500));
    drive.signal("CONT");
    drive.says("STOPPED");
    assert!(bench.phase_is("Tripped"));
    drive.signal("TERM");
    assert_eq!(drive.ends().code(), Some(0));
    let ticks = bench.ticks();
    let tripped = ticks.iter().position(|it| it["phase"] == "Tripped").unwrap();
    for tick in &ticks[tripped..] {
        assert!((0..4).all(|i| tick[&format!("sent_{i}_counts")] == "0"), "{tick:?}");
    }
}

#[test]
fn stop_reaches_the_drivers_of_a_killed_and_of_a_hung_drive() {
    let bench = Bench::new();
    let _standin = bench.standin();
    let straight = |bench: &Bench| {
        let text = std::fs::read_to_string(bench.path("cart.toml")).unwrap();
        let port = bench.path("links/base").display().to_string();
        std::fs::write(bench.path("cart.toml"), text.replace("/dev/ttyUSB0", &port)).unwrap();
    };
    straight(&bench);
    let mut drive = bench.drive(&bench.hands(READY_AND_DRIVE));
    drive.says("Ready -> Driving");
    drive.signal("STOP");
    let stop = bench.gripline("stop").arg("--json").output().unwrap();
    let said: serde_json::Value = serde_json::from_slice(&stop.stdout).unwrap();
    assert_eq!(said["stopped_by"], "ports", "{said} {}", String::from_utf8_lossy(&stop.stderr));
    assert_eq!(said["links"][0]["latched"], true);
    assert_eq!(stop.status.code(), Some(0));
    assert!(!drive.ends().success(), "the hung holder was not ended");
    // The drivers are latched: the next drive starts in Tripped, and nothing moves.
    let mut again = bench.drive(&bench.hands("0.3,Start,1\n"));
    again.says("was found latched");
    wait_for("Tripped", || bench.phase_is("Tripped"));
    again.signal("KILL");
    let _ = again.ends();
    let last_act = bench.gripline("stop").arg("--last-act").output().unwrap();
    assert_eq!(last_act.status.code(), Some(0), "{}", String::from_utf8_lossy(&last_act.stderr));
}

#[test]
fn a_second_drive_is_refused_by_socket_and_by_port() {
    let bench = Bench::new();
    let _standin = bench.standin();
    let hands = bench.hands("60,end,\n");
    let mut drive = bench.drive(&hands);
    drive.says("answers as configured");
    let mut second = bench.drive(&hands);
    assert_eq!(second.ends().code(), Some(3));
    let told = second.errors();
    assert!(told.contains("already running") && told.contains(&drive.child.id().to_string()), "{told}");
    let mut command = bench.gripline("drive");
    command.arg("--port").arg(bench.path("links/base")).arg("--hands").arg(&hands);
    command.arg("--socket").arg(bench.path("other.sock")).arg("--record-dir").arg(bench.path("runs"));
    let mut third = Running::start(&mut command);
    assert_eq!(third.ends().code(), Some(3));
    let told = third.errors();
    assert!(told.contains("is in use"), "{told}");
    assert!(bench.phase_is("Parked"), "the first drive was disturbed");
}

#[test]
fn what_cannot_run_says_what_where_and_what_to_do() {
    let bench = Bench::new();
    let hands = bench.hands("60,end,\n");
    let file = bench.path("plain.txt");
    std::fs::write(&file, "x").unwrap();
    let drive = |port: &Path| {
        let mut command = bench.gripline("drive");
        command
            .arg("--port")
            .arg(port)
            .arg("--hands")
            .arg(&hands)
            .arg("--record-dir")
            .arg(bench.path("runs"));
        let out = command.output().unwrap();
        (out.status.code(), String::from_utf8_lossy(&out.stderr).into_owned())
    };
    let (code, told) = drive(&bench.path("no-such-port"));
    assert!(code == Some(3) && told.contains("no port") && told.contains("no-such-port"), "{code:?} {told}");
    let (code, told) = drive(&file);
    assert!(code == Some(3) && told.contains("is not a serial port"), "{code:?} {told}");
    let (code, told) = drive(Path::new("/dev/null"));
    assert!(code == Some(3) && told.contains("/dev/null"), "{code:?} {told}");

    for (args, code, words) in [
        (vec!["drive"], 2, "CONFIG"),
        (vec!["drive", "/no/such.toml"], 2, "cannot read configuration /no/such.toml"),
        (vec!["fly"], 2, "fly"),
        (vec!["check", "/"], 2, "cannot read configuration"),
        (vec!["review", "/dev/null"], 2, "no run file"),
        (vec!["review", "/no/such.pcapng"], 2, "cannot read run file"),
        (vec!["rehearse", "--seconds", "nan"], 2, "20 to 600"),
        (vec!["rehearse", "/no/such.toml"], 2, "cannot read configuration"),
    ] {
        let out = Command::new(GRIPLINE).args(&args).current_dir(bench.dir.path()).output().unwrap();
        let told = String::from_utf8_lossy(&out.stderr);
        assert!(out.status.code() == Some(code) && told.contains(words), "{args:?}: {:?} {told}", out.status);
    }
    let bad = bench.hands("0.1,Strat,1\nx,South,1\n");
    let out = bench.gripline("drive").arg("--hands").arg(bad).output().unwrap();
    let told = String::from_utf8_lossy(&out.stderr).into_owned();
    assert!(out.status.code() == Some(2) && told.contains("line 1") && told.contains("line 2"), "{told}");
    let out = bench.gripline("status").output().unwrap();
    assert_eq!(out.status.code(), Some(1));
}

#[test]
fn drivers_that_share_no_code_are_driven_stopped_and_reset() {
    let bench = Bench::new();
    let mut peer = peer(&PEER);
    let script = format!(
        "{READY_AND_DRIVE}2.0,East,1\n2.1,East,0\n2.2,RightTrigger2,0\n2.2,LeftStickY,0\n4.0,Select,1\n5.5,Select,0\n6.0,end,\n"
    );
    let mut drive = peer.drive(&bench, &bench.hands(&script), &["--on-stands"]);
    drive.says("answers as configured");
    drive.says("Ready -> Driving");
    drive.says("STOPPED: stop asked at the pad");
    drive.says("Tripped -> Parked");
    assert_eq!(drive.ends().code(), Some(0));
    peer.told("quit");
}

#[test]
fn drivers_that_are_somebody_else_keep_it_parked_and_are_named() {
    let bench = Bench::new();
    let mut arguments = PEER;
    arguments[1] = "somebody else";
    let peer = peer(&arguments);
    let mut drive = peer.drive(&bench, &bench.hands("0.3,Start,1\n0.5,Start,0\n"), &["--on-stands"]);
    drive.says("not as configured");
    drive.says("ready refused");
    assert!(bench.phase_is("Parked"));
    let told = drive.seen.join("\n");
    assert!(
        told.contains("somebody else") && told.contains("tray cart drivers"),
        "both names must be told: {told}"
    );
}
