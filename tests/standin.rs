//! The built program as a stand-in: spoken to through its ports, with real signals.

#![expect(clippy::unwrap_used, reason = "a test may end where it fails")]

use std::fs::{File, OpenOptions};
use std::io::{BufRead, BufReader, Read, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdin, ChildStdout, Command, Output, Stdio};

use gripline::sys::clock;
use gripline::wire::{
    Deframer, Drive, Feedback, FromDrivers, MAX_ON_LINE, Mode, ToDrivers, emit_to_drivers, flag,
    parse_from_drivers, status,
};

/// How long to wait for what must come.
const PATIENCE_S: f64 = 20.0;

const CONFIG: &str = r#"
[base]
name = "hay barrow"
outline_m = [0.6, 0.8]
[[wheel]]
name = "front left"
at_m = [0.20, 0.15]
drive_deg = 0.0
roller_deg = -45.0
radius_m = 0.05
max_rad_s = 24.0
max_rad_s2 = 120.0
link = "front"
channel = 0
reversed = false
gear = 1.0
[[wheel]]
name = "front right"
at_m = [0.20, -0.15]
drive_deg = 0.0
roller_deg = 45.0
radius_m = 0.05
max_rad_s = 24.0
max_rad_s2 = 120.0
link = "front"
channel = 1
reversed = false
gear = 1.0
[[wheel]]
name = "rear left"
at_m = [-0.20, 0.15]
drive_deg = 0.0
roller_deg = 45.0
radius_m = 0.05
max_rad_s = 24.0
max_rad_s2 = 120.0
link = "rear"
channel = 0
reversed = false
gear = 1.0
[[wheel]]
name = "rear right"
at_m = [-0.20, -0.15]
drive_deg = 0.0
roller_deg = -45.0
radius_m = 0.05
max_rad_s = 24.0
max_rad_s2 = 120.0
link = "rear"
channel = 1
reversed = false
gear = 1.0
[[link]]
name = "front"
port = "/dev/ttyUSB0"
baud = 460800
valid_ms = 100
expect = "front drivers"
channels = 2
speed_lsb_urad_s = 2000
angle_lsb_urad = 500
[[link]]
name = "rear"
port = "/dev/ttyUSB1"
baud = 460800
valid_ms = 100
expect = "rear drivers"
channels = 2
speed_lsb_urad_s = 2000
angle_lsb_urad = 500
[[pace]]
name = "creep"
travel_m_s = 0.25
turn_rad_s = 0.6
"#;

/// The program, running.
struct Standin {
    child: Child,
    input: Option<ChildStdin>,
    said: BufReader<ChildStdout>,
    dir: tempfile::TempDir,
}

impl Standin {
    fn start(more: &[&str]) -> Self {
        let dir = tempfile::tempdir().unwrap();
        let config = dir.path().join("base.toml");
        std::fs::write(&config, CONFIG).unwrap();
        let mut child = Command::new(env!("CARGO_BIN_EXE_gripline"))
            .arg("standin")
            .arg(&config)
            .arg("--link-dir")
            .arg(dir.path().join("ports"))
            .arg("--trace")
            .arg(dir.path().join("trace.csv"))
            .args(more)
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap();
        let said = BufReader::new(child.stdout.take().unwrap());
        Self { input: child.stdin.take(), child, said, dir }
    }

    fn ask(&mut self, line: &str) {
        writeln!(self.input.as_ref().unwrap(), "{line}").unwrap();
    }

    fn line(&mut self) -> String {
        let mut line = String::new();
        self.said.read_line(&mut line).unwrap();
        line.trim_end().to_owned()
    }

    fn port(&self, link: &str) -> PathBuf {
        self.dir.path().join("ports").join(link)
    }

    fn signal(&self, name: &str) {
        assert!(
            Command::new("kill").args(["-s", name, &self.child.id().to_string()]).status().unwrap().success()
        );
    }

    /// Waits for the end: exit status, and what was said on stderr.
    fn end(&mut self) -> (Option<i32>, String) {
        let status = self.child.wait().unwrap();
        let mut errors = String::new();
        self.child.stderr.take().unwrap().read_to_string(&mut errors).unwrap();
        (status.code(), errors)
    }
}

impl Drop for Standin {
    fn drop(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

/// The host's end of a line.
struct Host {
    line: File,
    deframer: Deframer,
}

impl Host {
    fn open(path: &Path) -> Self {
        let line = OpenOptions::new().read(true).write(true).open(path).unwrap();
        Self { line, deframer: Deframer::new() }
    }

    fn say(&mut self, message: &ToDrivers) {
        let mut frame = [0; MAX_ON_LINE];
        let length = emit_to_drivers(7, message, &mut frame);
        self.line.write_all(&frame[..length]).unwrap();
    }

    fn wait<T>(&mut self, mut wanted: impl FnMut(FromDrivers) -> Option<T>) -> T {
        let begin = clock::now();
        loop {
            let mut byte = [0];
            self.line.read_exact(&mut byte).unwrap();
            let Some(Ok(plain)) = self.deframer.push(byte[0]) else { continue };
            if let Ok((_, message)) = parse_from_drivers(plain)
                && let Some(found) = wanted(message)
            {
                return found;
            }
            assert!(clock::now().since_s(begin) < PATIENCE_S, "it did not come");
        }
    }

    fn wait_feedback(&mut self, mut wanted: impl FnMut(&Feedback) -> bool) -> Feedback {
        self.wait(|message| match message {
            FromDrivers::Feedback(feedback) => wanted(&feedback).then_some(feedback),
            FromDrivers::Identity(_) => None,
        })
    }
}

#[test]
fn it_stands_in_for_a_base_until_a_signal_comes() {
    let mut standin = Standin::start(&["--seed", "5"]);
    for link in ["front", "rear"] {
        let line = standin.line();
        assert!(line.starts_with(&format!("{link}: /dev/pts/")), "{line}");
        assert!(line.contains(&standin.port(link).display().to_string()), "{line}");
    }
    let mut front = Host::open(&standin.port("front"));
    front.say(&ToDrivers::Ask);
    let identity = front.wait(|message| match message {
        FromDrivers::Identity(identity) => Some(identity),
        FromDrivers::Feedback(_) => None,
    });
    assert_eq!(identity.name.as_str(), "front drivers");
    assert_ne!(identity.flags & flag::SIMULATED, 0);
    assert_eq!(standin.line(), "front: somebody has come");

    // It drives: the wheels of the front link turn, and what was told on the line is what the base did.
    for mode in [Mode::Park, Mode::Hold, Mode::Run] {
        let speeds = if mode == Mode::Run { [2000, 2000] } else { [0, 0] };
        front.say(&ToDrivers::Drive(Drive {
            mode,
            valid_ms: 900,
            ramp_ms: 100,
            speeds: speeds.into_iter().collect(),
        }));
    }
    front.wait_feedback(|feedback| feedback.channels.iter().all(|channel| channel.speed > 1900));
    // Nothing more is said: the drivers stop by themselves.
    front.wait_feedback(|feedback| {
        let bits = status::LATCHED | status::WENT_SILENT;
        feedback.status & (bits | status::TORQUE_ON) == bits && feedback.channels.iter().all(|c| c.speed == 0)
    });

    // Faults are asked for by name; a bad line is answered and changes nothing.
    standin.ask("over-current front");
    assert_eq!(standin.line(), "done: over-current front");
    front.wait_feedback(|feedback| feedback.status & status::OVER_CURRENT != 0);
    standin.ask("over-current middle");
    standin.ask("where");
    assert!(standin.line().starts_with("x 0."), "the wheels moved the base forward");
    standin.ask("help");
    assert!(standin.line().starts_with("mute"));

    // The host goes and another comes to the same port.
    drop(front);
    let mut front = Host::open(&standin.port("front"));
    front.wait_feedback(|feedback| feedback.boot == identity.boot);

    let trace = standin.dir.path().join("trace.csv");
    standin.signal("TERM");
    let (code, errors) = standin.end();
    assert_eq!(code, Some(0));
    assert_eq!(errors, "gripline: there is no link `middle`; there are: front, rear\n");
    assert!(std::fs::symlink_metadata(standin.port("front")).is_err(), "its links are gone");
    let trace = std::fs::read_to_string(trace).unwrap();
    let last: Vec<f64> =
        trace.lines().last().unwrap().split(',').map(|value| value.parse().unwrap()).collect();
    assert!(last[1] > 0.01, "x at the end: {}", last[1]);
    let fastest = trace.lines().skip(1).map(|row| row.split(',').nth(8).unwrap().parse::<f64>().unwrap());
    let fastest = fastest.fold(0.0, f64::max);
    assert!((fastest - 4.0).abs() < 0.05, "2000 counts of 2 mrad/s: {fastest}");
}

#[test]
fn closed_standard_input_ends_it_only_if_told() {
    let mut standin = Standin::start(&["--quiet"]);
    standin.line();
    drop(standin.input.take());
    let mut rear = Host::open(&standin.port("rear"));
    for _ in 0..20 {
        rear.wait_feedback(|_| true);
    }
    assert!(standin.child.try_wait().unwrap().is_none(), "it goes on");
    standin.signal("INT");
    assert_eq!(standin.end(), (Some(0), String::new()));

    let mut standin = Standin::start(&["--until-eof"]);
    standin.line();
    drop(standin.input.take());
    assert_eq!(standin.end(), (Some(0), String::new()));
}

#[test]
fn a_given_port_is_served_instead() {
    let line = gripline::sys::serial::open_kept_pty().unwrap();
    let port = format!("rear={}", line.path.display());
    let mut standin = Standin::start(&["--port", &port]);
    standin.line();
    assert!(standin.line().starts_with(&format!("rear: {}", line.path.display())));
    let mut host = Host { line: line.master, deframer: Deframer::new() };
    host.say(&ToDrivers::Ask);
    let begin = clock::now();
    loop {
        let mut buffer = [0; 512];
        let length = host.line.read(&mut buffer).unwrap_or(0);
        let said = String::from_utf8_lossy(&buffer[..length]).into_owned();
        if said.contains("rear drivers") {
            break;
        }
        assert!(clock::now().since_s(begin) < PATIENCE_S, "it did not answer");
        clock::sleep_ms(2);
    }
    standin.signal("TERM");
    assert_eq!(standin.end(), (Some(0), String::new()));
}

#[test]
fn what_cannot_be_served_is_said_in_one_line() {
    let dir = tempfile::tempdir().unwrap();
    let config = dir.path().join("base.toml");
    std::fs::write(&config, CONFIG).unwrap();
    let config = config.display().to_string();
    let run = |args: &[&str]| -> Output {
        Command::new(env!("CARGO_BIN_EXE_gripline"))
            .arg("standin")
            .args(args)
            .stdin(Stdio::null())
            .output()
            .unwrap()
    };
    for (args, code, told) in [
        (vec!["/no/such/base.toml"], 2, "/no/such/base.toml"),
        (
            vec![&config, "--port", "/dev/null"],
            2,
            "--port /dev/null names no link; write LINK=PATH with one of front, rear",
        ),
        (vec![&config, "--port", "rear=/dev/no-such"], 3, "cannot open port /dev/no-such"),
        (vec![&config, "--port", "rear=/dev/null"], 3, "cannot open port /dev/null"),
        (
            vec![&config, "--port", "rear=/dev/a", "--port", "rear=/dev/b"],
            2,
            "link `rear` is given two ports",
        ),
        (vec![&config, "--trace", "/no/such/trace.csv"], 2, "cannot write the trace /no/such/trace.csv"),
        (vec![&config, "--seed", "many"], 2, "seed"),
        (vec![], 2, "CONFIG"),
    ] {
        let output = run(&args.iter().map(|arg| &**arg).collect::<Vec<_>>());
        let errors = String::from_utf8(output.stderr).unwrap();
        assert_eq!(output.status.code(), Some(code), "{args:?}: {errors}");
        assert!(errors.contains(told), "{args:?}: {errors}");
        assert!(errors.starts_with("gripline: ") && errors.lines().count() == 1, "{args:?}: {errors}");
        assert!(output.stdout.is_empty(), "{args:?}");
    }
}
