//! The built program: `drive` against the stand-in and against drivers that share no code with it, over real
//! pseudo-terminals, with real signals. Nothing here depends on speed: each step waits for what it needs.
#![expect(
    clippy::unwrap_used,
    clippy::panic,
    clippy::disallowed_methods,
    reason = "tests of a running program wait and stop by themselves"
)]

use std::io::{BufRead, BufReader, Read, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, Command, ExitStatus, Stdio};
use std::sync::mpsc::{Receiver, channel};
use std::time::{Duration, Instant};

const GRIPLINE: &str = env!("CARGO_BIN_EXE_gripline");
const EXAMPLE: &str = concat!(env!("CARGO_MANIFEST_DIR"), "/config/four-mecanum.toml");
const PATIENCE: Duration = Duration::from_secs(20);

/// A folder with a configuration whose guards bear a busy test machine, and what runs on it.
struct Bench {
    dir: tempfile::TempDir,
}

impl Bench {
    fn new() -> Self {
        let dir = tempfile::tempdir().unwrap();
        let text = std::fs::read_to_string(EXAMPLE).unwrap();
        let relaxed = text.replace("valid_ms = 100 ", "valid_ms = 600 ").replace(
            "[guard]\n",
            "[guard]\nlate_ms = 500.0\nfeedback_quiet_ms = 600.0\nnot_heard_ms = 600.0\nfollow_s = 3.0\nskid_s = 5.0\nstop_margin_s = 3.0\n",
        );
        let relaxed = relaxed.replace("clear_m = 3.0 ", "clear_m = 9.0 ") + "\n[console]\nreset = true\n";
        std::fs::write(dir.path().join("cart.toml"), relaxed).unwrap();
        Self { dir }
    }

    fn path(&self, name: &str) -> PathBuf {
        self.dir.path().join(name)
    }

    fn hands(&self, lines: &str) -> PathBuf {
        let path = self.path("hands.csv");
        std::fs::write(&path, lines).unwrap();
        path
    }

    fn gripline(&self, command: &str) -> Command {
        let mut it = Command::new(GRIPLINE);
        it.arg(command)
            .arg(self.path("cart.toml"))
            .env("XDG_RUNTIME_DIR", self.dir.path())
            .env_remove("RUNTIME_DIRECTORY");
        it
    }

    fn standin(&self) -> Running {
        let mut command = self.gripline("standin");
        command.arg("--link-dir").arg(self.path("links")).args(["--quiet", "--until-eof"]);
        let it = Running::start(&mut command);
        wait_for("the stand-in's port", || self.path("links/base").exists());
        it
    }

    fn drive(&self, hands: &Path) -> Running {
        let mut command = self.gripline("drive");
        command.arg("--port").arg(self.path("links/base")).arg("--hands").arg(hands);
        command.arg("--record-dir").arg(self.path("runs"));
        Running::start(&mut command)
    }

    fn status(&self) -> Option<serde_json::Value> {
        let out = self.gripline("status").arg("--json").output().unwrap();
        serde_json::from_slice(&out.stdout).ok()
    }

    fn phase_is(&self, phase: &str) -> bool {
        self.status().is_some_and(|it| it["phase"] == phase)
    }

    fn run_file(&self) -> PathBuf {
        std::fs::read_dir(self.path("runs")).unwrap().next().unwrap().unwrap().path()
    }

    /// The rows of ticks.csv, as maps by column.
    fn ticks(&self) -> Vec<std::collections::HashMap<String, String>> {
        let out = Command::new(GRIPLINE)
            .arg("review")
            .arg(self.run_file())
            .arg("--csv")
            .arg(self.path("csv"))
            .output()
            .unwrap();
        assert!(out.status.success(), "{}", String::from_utf8_lossy(&out.stderr));
        let text = std::fs::read_to_string(self.path("csv/ticks.csv")).unwrap();
        let mut lines = text.lines();
        let names: Vec<&str> = lines.next().unwrap().split(',').collect();
        lines
            .map(|line| {
                names.iter().map(|it| (*it).to_owned()).zip(line.split(',').map(str::to_owned)).collect()
            })
            .collect()
    }
}

/// A started process: its lines are collected, and it is ended with the test.
struct Running {
    child: Child,
    lines: Receiver<String>,
    seen: Vec<String>,
    errors: Receiver<String>,
}

impl Running {
    fn start(command: &mut Command) -> Self {
        let mut child =
            command.stdin(Stdio::piped()).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
        let lines = collect(child.stdout.take().unwrap());
        let errors = collect(child.stderr.take().unwrap());
        Self { child, lines, seen: Vec::new(), errors }
    }

    /// Waits until a line contains these words.
    fn says(&mut self, words: &str) {
        let until = Instant::now() + PATIENCE;
        loop {
            match self.lines.recv_timeout(Duration::from_millis(50)) {
                Ok(line) => {
                    let found = line.contains(words);
                    self.seen.push(line);
                    if found {
                        return;
                    }
                }
                Err(_) => assert!(Instant::now() < until, "never said {words:?}; said {:#?}", self.seen),
            }
        }
    }

    fn signal(&self, name: &str) {
        let pid = self.child.id().to_string();
        assert!(Command::new("kill").args([&format!("-{name}"), &pid]).status().unwrap().success());
    }

    fn ends(&mut self) -> ExitStatus {
        let until = Instant::now() + PATIENCE;
        loop {
            if let Some(status) = self.child.try_wait().unwrap() {
                return status;
            }
            if Instant::now() > until {
                let said: Vec<String> = self.lines.try_iter().collect();
                panic!("did not end; said {:#?} {said:#?}", self.seen);
            }
            std::thread::sleep(Duration::from_millis(10));
        }
    }

    fn errors(&mut self) -> String {
        let _ = self.ends();
        self.errors.iter().collect::<Vec<_>>().join("\n")
    }
}

impl Drop for Running {
    fn drop(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

fn collect(from: impl Read + Send + 'static) -> Receiver<String> {
    let (tell, lines) = channel();
    std::thread::spawn(move || {
        for line in BufReader::new(from).lines().map_while(Result::ok) {
            if tell.send(line).is_err() {
                return;
            }
        }
    });
    lines
}

fn wait_for(what: &str, mut is_so: impl FnMut() -> bool) {
    let until = Instant::now() + PATIENCE;
    while !is_so() {
        assert!(Instant::now() < until, "waited in vain for {what}");
        std::thread::sleep(Duration::from_millis(20));
    }
}

const READY_AND_DRIVE: &str = "0.3,Start,1\n0.5,Start,0\n0.8,RightTrigger2,1\n1.0,LeftStickY,1\n";

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

/// Drivers in Python that share no code with this program, on a pseudo-terminal of their own.
struct Peer {
    running: Running,
    port: PathBuf,
}

fn peer(arguments: &[&str]) -> Peer {
    let mut command = Command::new("python3");
    command
        .arg("-u")
        .arg(concat!(env!("CARGO_MANIFEST_DIR"), "/tests/peer/peer.py"))
        .arg("--pty")
        .args(arguments);
    let running = Running::start(&mut command);
    let mut port = None;
    wait_for("the peer's port", || {
        let line = running.lines.recv_timeout(Duration::from_millis(50)).unwrap_or_default();
        if let Some(at) = line.find("/dev/pts/") {
            let end = line[at..].find(['"', ' ', ',']).map_or(line.len(), |it| at + it);
            port = Some(PathBuf::from(&line[at..end]));
        }
        port.is_some()
    });
    Peer { running, port: port.unwrap() }
}

impl Peer {
    fn drive(&self, bench: &Bench, hands: &Path, extra: &[&str]) -> Running {
        let mut command = bench.gripline("drive");
        command.arg("--port").arg(&self.port).arg("--hands").arg(hands).args(extra);
        command.arg("--record-dir").arg(bench.path("runs"));
        Running::start(&mut command)
    }

    fn told(&mut self, line: &str) {
        let input = self.running.child.stdin.as_mut().unwrap();
        writeln!(input, "{line}").unwrap();
        input.flush().unwrap();
    }
}

const PEER: [&str; 8] =
    ["--name", "tray cart drivers", "--channels", "4", "--speed-lsb", "1000", "--angle-lsb", "500"];

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
