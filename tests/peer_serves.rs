//! The drivers in Python on a real pseudo-terminal: they speak, and they misbehave as they are told.

#![expect(clippy::unwrap_used, clippy::panic, reason = "a test may end where it fails")]

use std::fs::{File, OpenOptions};
use std::io::{BufRead, BufReader, Read, Write};
use std::process::{Child, ChildStdin, ChildStdout, Command, Stdio};

use gripline::sys::clock;
use gripline::wire::{
    Deframer, Drive, Feedback, FromDrivers, Identity, MAX_ON_LINE, Mode, ToDrivers, WireError,
    emit_to_drivers, parse_from_drivers, status,
};

/// How long to wait for what must come.
const PATIENCE_S: f64 = 20.0;

struct Peer {
    child: Child,
    input: ChildStdin,
    log: BufReader<ChildStdout>,
    line: File,
    deframer: Deframer,
    sequence: u8,
}

impl Peer {
    fn start() -> Self {
        let path = concat!(env!("CARGO_MANIFEST_DIR"), "/tests/peer/peer.py");
        let mut child = Command::new("python3")
            .args(["-B", path, "--pty", "--until-eof", "--channels", "2", "--name", "other cart"])
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .unwrap_or_else(|why| panic!("python3 is needed for this test: {why}"));
        let mut log = BufReader::new(child.stdout.take().unwrap());
        let mut first = String::new();
        log.read_line(&mut first).unwrap();
        let first: serde_json::Value = serde_json::from_str(&first).unwrap();
        assert_eq!(first["event"], "open");
        let line = OpenOptions::new().read(true).write(true).open(first["path"].as_str().unwrap()).unwrap();
        let input = child.stdin.take().unwrap();
        Self { child, input, log, line, deframer: Deframer::new(), sequence: 0 }
    }

    fn ask(&mut self, command: &str) {
        writeln!(self.input, "{command}").unwrap();
    }

    fn say(&mut self, message: &ToDrivers) {
        let mut frame = [0; MAX_ON_LINE];
        self.sequence = self.sequence.wrapping_add(1);
        let length = emit_to_drivers(self.sequence, message, &mut frame);
        self.line.write_all(&frame[..length]).unwrap();
    }

    /// The next frame, or what was wrong with it.
    fn hear(&mut self) -> Result<FromDrivers, WireError> {
        loop {
            let mut byte = [0];
            self.line.read_exact(&mut byte).unwrap();
            if let Some(plain) = self.deframer.push(byte[0]) {
                return plain.and_then(parse_from_drivers).map(|(_, message)| message);
            }
        }
    }

    fn wait<T>(&mut self, mut wanted: impl FnMut(Result<FromDrivers, WireError>) -> Option<T>) -> T {
        let begin = clock::now();
        loop {
            let heard = self.hear();
            if let Some(found) = wanted(heard) {
                return found;
            }
            assert!(clock::now().since_s(begin) < PATIENCE_S, "it did not come");
        }
    }

    fn wait_feedback(&mut self, mut wanted: impl FnMut(&Feedback) -> bool) -> Feedback {
        self.wait(|heard| match heard {
            Ok(FromDrivers::Feedback(feedback)) => wanted(&feedback).then_some(feedback),
            Ok(FromDrivers::Identity(_)) | Err(_) => None,
        })
    }

    fn wait_identity(&mut self) -> Identity {
        self.wait(|heard| match heard {
            Ok(FromDrivers::Identity(identity)) => Some(identity),
            Ok(FromDrivers::Feedback(_)) | Err(_) => None,
        })
    }
}

#[test]
fn it_drives_and_misbehaves_on_command() {
    let mut peer = Peer::start();
    peer.say(&ToDrivers::Ask);
    let identity = peer.wait_identity();
    assert_eq!((identity.name.as_str(), identity.channels, identity.flags), ("other cart", 2, 7));

    // It drives: park, hold, run, and the motors follow.
    for mode in [Mode::Park, Mode::Hold, Mode::Run] {
        let speeds = if mode == Mode::Run { [500, -300] } else { [0, 0] };
        let drive = Drive { mode, valid_ms: 1000, ramp_ms: 50, speeds: speeds.into_iter().collect() };
        peer.say(&ToDrivers::Drive(drive));
    }
    let moving = peer.wait_feedback(|f| f.channels[0].speed > 400 && f.channels[1].speed < -200);
    assert_eq!(moving.status, status::TORQUE_ON | status::YAW_RATE_VALID);

    peer.ask("bits over-current encoder");
    let bits = status::OVER_CURRENT | status::ENCODER;
    peer.wait_feedback(|f| f.status & status::FAULTS == bits);
    peer.ask("bits");
    peer.wait_feedback(|f| f.status & status::FAULTS == 0);

    peer.ask("latch");
    let latched =
        peer.wait_feedback(|f| f.status & status::LATCHED != 0 && f.status & status::TORQUE_ON == 0);
    peer.say(&ToDrivers::Clear { token: latched.token.wrapping_add(1) });
    let refused = peer.wait_feedback(|f| f.refused == 1);
    assert_ne!(refused.status & status::LATCHED, 0);
    peer.say(&ToDrivers::Clear { token: latched.token });
    peer.wait_feedback(|f| f.status & status::LATCHED == 0);

    peer.ask("stop-input open");
    peer.wait_feedback(|f| f.status & status::STOP_INPUT_OPEN != 0 && f.status & status::LATCHED != 0);

    peer.ask("restart");
    let anew = peer.wait_feedback(|f| f.boot == identity.boot + 1);
    assert!(anew.clock_us < 10_000_000 && anew.channels[0].angle == 0);

    peer.ask("corrupt 1");
    assert!(peer.wait(|heard| heard.err()).to_string().len() > 4);
    peer.ask("garbage 100");
    peer.wait(|heard| heard.is_err().then_some(()));
    peer.wait_feedback(|_| true); // whole again

    peer.ask("identity name some other base");
    peer.ask("identity channels 3");
    peer.ask("identify");
    let other = peer.wait_identity();
    assert_eq!((other.name.as_str(), other.channels), ("some other base", 3));

    peer.ask("channel 1 runaway 900");
    peer.ask("yaw off");
    peer.wait_feedback(|f| f.status & status::YAW_RATE_VALID == 0);
    peer.ask("clock -1000000000");
    peer.wait_feedback(|f| f.clock_us > 3_000_000_000);
    peer.ask("frobnicate");
    peer.ask("quit");
    drop(peer.input);
    assert!(peer.child.wait().unwrap().success());

    // Its log is one object a line, and tells what it was asked, and of what it had no notion.
    let lines: Vec<serde_json::Value> =
        peer.log.lines().map(|line| serde_json::from_str(&line.unwrap()).unwrap()).collect();
    let tells = |key: &str, value: &str| lines.iter().filter(|line| line[key] == value).count();
    assert_eq!(tells("event", "unknown"), 1);
    assert_eq!((tells("kind", "drive"), tells("kind", "clear"), tells("kind", "ask")), (3, 2, 1));
    assert_eq!(tells("event", "closed"), 1);
    assert!(tells("kind", "feedback") > 10);
}
