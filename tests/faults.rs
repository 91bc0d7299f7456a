//! A tick that spins for ever, sleeps for ever or panics: the sentinel and the panic hook stop the drivers all the same.
//! The faults exist only in builds with the feature `test-faults`, which `tests/run` sets.
#![cfg(feature = "test-faults")]
#![expect(
    clippy::unwrap_used,
    clippy::disallowed_methods,
    reason = "tests of a running program wait by themselves"
)]

use std::io::{BufRead, BufReader};
use std::process::{Child, Command, Stdio};
use std::sync::mpsc::channel;
use std::time::{Duration, Instant};

const GRIPLINE: &str = env!("CARGO_BIN_EXE_gripline");

struct Ended(Child);

impl Drop for Ended {
    fn drop(&mut self) {
        let _ = self.0.kill();
        let _ = self.0.wait();
    }
}

/// Drives the peer, which shares no code with the program, breaks the tick in motion, and gives what the peer heard.
fn heard_after(fault: &str) -> Vec<serde_json::Value> {
    let dir = tempfile::tempdir().unwrap();
    let log = dir.path().join("peer.jsonl");
    let port = dir.path().join("port");
    let peer = Command::new("python3")
        .args(["-u", concat!(env!("CARGO_MANIFEST_DIR"), "/tests/peer/peer.py"), "--pty", "--link"])
        .arg(&port)
        .args(["--name", "tray cart drivers", "--channels", "4", "--speed-lsb", "1000", "--angle-lsb", "500"])
        .arg("--log")
        .arg(&log)
        .arg("--no-commands")
        .stdin(Stdio::null())
        .spawn()
        .unwrap();
    let _peer = Ended(peer);
    let until = Instant::now() + Duration::from_secs(20);
    while !port.exists() {
        assert!(Instant::now() < until, "the peer made no port");
        std::thread::sleep(Duration::from_millis(10));
    }
    let hands = dir.path().join("hands.csv");
    std::fs::write(&hands, "0.3,Start,1\n0.4,Start,0\n0.7,RightTrigger2,1\n0.9,LeftStickY,1\n").unwrap();
    let mut drive = Command::new(GRIPLINE)
        .arg("drive")
        .arg(concat!(env!("CARGO_MANIFEST_DIR"), "/config/four-mecanum.toml"))
        .arg("--port")
        .arg(&port)
        .arg("--hands")
        .arg(&hands)
        .arg("--on-stands")
        .arg("--record-dir")
        .arg(dir.path())
        .arg("--socket")
        .arg(dir.path().join("console.sock"))
        .env("GRIPLINE_TEST_FAULT", fault)
        .stdin(Stdio::null())
        .stdout(Stdio::piped())
        .stderr(Stdio::null())
        .spawn()
        .unwrap();
    let out = drive.stdout.take().unwrap();
    let _drive = Ended(drive);
    let (tell, _lines) = channel();
    std::thread::spawn(move || {
        BufReader::new(out).lines().map_while(Result::ok).for_each(|it| drop(tell.send(it)))
    });
    let is_stop = |it: &serde_json::Value| it["dir"] == "in" && it["kind"] == "stop";
    loop {
        let text = std::fs::read_to_string(&log).unwrap_or_default();
        let heard: Vec<serde_json::Value> =
            text.lines().filter_map(|it| serde_json::from_str(it).ok()).collect();
        let stops = heard.iter().filter(|it| is_stop(it)).count();
        if stops >= 3 || (stops >= 1 && fault.starts_with("panic")) {
            return heard;
        }
        assert!(Instant::now() < until, "no stop was heard after {fault}");
        std::thread::sleep(Duration::from_millis(20));
    }
}

#[test]
fn a_tick_that_dies_in_any_way_ends_in_stop_frames_and_no_more_motion() {
    for fault in ["spin:1.6", "sleep:1.6", "panic:1.6"] {
        let heard = heard_after(fault);
        let to_peer: Vec<&serde_json::Value> = heard.iter().filter(|it| it["dir"] == "in").collect();
        let first_stop = to_peer.iter().position(|it| it["kind"] == "stop").unwrap();
        assert!(
            to_peer[..first_stop].iter().any(|it| it["kind"] == "drive" && it["mode"] == "run"),
            "{fault}: it never drove"
        );
        assert!(
            to_peer[first_stop..].iter().all(|it| it["kind"] != "drive"),
            "{fault}: motion after the stop"
        );
    }
}
