//! The drivers' side of the line, three times: ours, the one in C that is there for firmware, and one in Python that
//! shares no code with either, written from the design's page alone. All are given the same random histories and must say
//! the same bytes.

#![expect(clippy::unwrap_used, clippy::panic, reason = "a test may end where it fails")]

use std::io::Write;
use std::process::{Command, Stdio};

use arrayvec::{ArrayString, ArrayVec};
use gripline::wire::driver::{Driver, Measured};
use gripline::wire::{
    ChannelState, Deframer, Drive, FromDrivers, Identity, MAX_ON_LINE, Mode, ToDrivers, emit_to_drivers,
    parse_from_drivers, status,
};

const CHANNELS: u8 = 3;
const STEPS: usize = 4000;

#[test]
fn ours_and_a_stranger_say_the_same_for_the_same_history() {
    let mut kinds_seen = 0;
    for seed in 1..=6 {
        let history = History::make(seed);
        kinds_seen |= history.status_seen;
        let answers = python(&history);
        for (step, (ours, line)) in history.ours.iter().zip(&answers).enumerate() {
            let theirs: serde_json::Value = serde_json::from_str(line).unwrap();
            let asked = &history.lines[step];
            assert_eq!(ours.said, theirs["hex"], "seed {seed}, step {step}: {asked}");
            assert_eq!(ours.torque, theirs["torque"].as_bool().unwrap(), "seed {seed}, step {step}: {asked}");
            let commanded = theirs["commanded"].as_array().unwrap();
            assert_eq!(commanded.len(), ours.commanded.len());
            for (ours, theirs) in ours.commanded.iter().zip(commanded) {
                // Ours is rounded to a count.
                let difference = (f64::from(*ours) - theirs.as_f64().unwrap()).abs();
                assert!(difference <= 0.51, "seed {seed}, step {step}: {ours} {theirs} {asked}");
            }
        }
        assert_eq!(answers.len(), STEPS, "seed {seed}");
    }
    // The histories went everywhere: every bit of the status came up.
    assert_eq!(kinds_seen, 0x07ff);
}

/// The one in C says and commands the same to the bit, under the sanitizers for addresses and undefined behaviour.
#[test]
fn the_one_in_c_says_and_commands_the_same() {
    let dir = tempfile::tempdir().unwrap();
    let program = dir.path().join("replay");
    compile(
        &["tests/agree/replay.c"],
        &["-fsanitize=address,undefined", "-fno-sanitize-recover=all", "-g"],
        &program,
    );
    for seed in 1..=40 {
        let history = History::make(seed);
        let mut child = Command::new(&program).stdin(Stdio::piped()).stdout(Stdio::piped()).spawn().unwrap();
        let mut input = child.stdin.take().unwrap();
        let lines = history.plain.join("\n");
        let writer = std::thread::spawn(move || writeln!(input, "{lines}").unwrap());
        let output = child.wait_with_output().unwrap();
        writer.join().unwrap();
        assert!(output.status.success(), "seed {seed}: {}", String::from_utf8_lossy(&output.stderr));
        let said = String::from_utf8(output.stdout).unwrap();
        assert_eq!(said.lines().count(), STEPS, "seed {seed}");
        for (step, (ours, theirs)) in history.ours.iter().zip(said.lines()).enumerate() {
            let speeds: Vec<String> = ours.commanded.iter().map(ToString::to_string).collect();
            let said = if ours.said.is_empty() { "-" } else { &ours.said };
            let ours = format!("{said} {} {}", u8::from(ours.torque), speeds.join(" "));
            assert_eq!(ours, theirs, "seed {seed}, step {step}: {}", history.plain[step]);
        }
    }
}

/// As for somebody's firmware: every warning is an error.
fn compile(sources: &[&str], options: &[&str], program: &std::path::Path) {
    let root = env!("CARGO_MANIFEST_DIR");
    let out = Command::new("gcc")
        .current_dir(root)
        .args(["-std=c99", "-Wall", "-Wextra", "-Werror", "-pedantic", "-Wconversion", "-Isrc/wire/c"])
        .args(options)
        .args(sources)
        .args(["src/wire/c/gripline.c", "-o"])
        .arg(program)
        .output()
        .unwrap_or_else(|why| panic!("gcc is needed for this test: {why}"));
    assert!(out.status.success(), "{}", String::from_utf8_lossy(&out.stderr));
}

/// What ours did in one step.
struct Ours {
    said: String,
    commanded: Vec<i16>,
    torque: bool,
}

/// A random history, as lines for the stranger, and what ours made of it.
struct History {
    lines: Vec<String>,
    /// The same without names, for the one in C.
    plain: Vec<String>,
    ours: Vec<Ours>,
    tokens: Vec<u16>,
    status_seen: u16,
}

impl History {
    fn make(seed: u64) -> Self {
        let mut random = Random(seed);
        let mut driver = Driver::new(identity(), 0);
        let mut measured = Measured {
            channels: [ChannelState::default(); CHANNELS as usize].into_iter().collect(),
            supply_mv: 24_000,
            ..Measured::default()
        };
        let mut history =
            Self { lines: vec![], plain: vec![], ours: vec![], tokens: vec![token(&driver)], status_seen: 0 };
        let (mut now_us, mut token_said, mut sequence) = (0_u64, 0, 0_u8);
        for _ in 0..STEPS {
            now_us += random.below(15_000);
            if random.below(10) == 0 {
                measured.stop_input_open = !measured.stop_input_open && random.below(4) == 0;
            }
            measured.yaw_rate = (random.below(8) > 0).then_some(random.next() as i16);
            measured.supply_mv = random.next() as u16;
            measured.bits = [0, 0, 0, status::OVER_CURRENT, status::OVER_TEMPERATURE, status::UNDER_VOLTAGE]
                .into_iter()
                .chain([status::ENCODER, status::SCALED])
                .nth(random.below(8) as usize)
                .unwrap();
            for channel in &mut measured.channels {
                *channel = ChannelState { angle: random.next() as i32, speed: random.next() as i16 };
            }
            sequence = sequence.wrapping_add(1);
            let heard = random.bytes(sequence, token_said);
            history.lines.push(line(now_us, &measured, &heard));
            history.plain.push(plain_line(now_us, &measured, &heard));

            let mut said = Vec::new();
            driver.advance(now_us, &measured);
            history.draw(&driver);
            transmit(&mut driver, now_us, &measured, &mut said);
            for byte in heard {
                driver.receive(byte, now_us);
                history.draw(&driver);
                transmit(&mut driver, now_us, &measured, &mut said);
            }
            for (status, token) in feedback_in(&said) {
                history.status_seen |= status;
                token_said = token;
            }
            let command = driver.command(now_us);
            history.ours.push(Ours {
                said: hex(&said),
                commanded: command.speeds.to_vec(),
                torque: command.torque,
            });
        }
        history
    }

    /// Keeps each token that ours has drawn, for the stranger to draw the same.
    fn draw(&mut self, driver: &Driver) {
        let token = token(driver);
        if self.tokens.last() != Some(&token) {
            self.tokens.push(token);
        }
    }
}

fn identity() -> Identity {
    Identity {
        version: 1,
        flags: 7,
        channels: CHANNELS,
        speed_lsb_urad_s: 2000,
        angle_lsb_urad: 500,
        silence_ms: 400,
        ramp_max_ms: 600,
        boot: 0xbeef,
        name: ArrayString::from("bay cart drivers").unwrap(),
    }
}

fn python(history: &History) -> Vec<String> {
    let tokens = history.tokens.iter().map(ToString::to_string).collect::<Vec<_>>().join(",");
    let peer = concat!(env!("CARGO_MANIFEST_DIR"), "/tests/peer/peer.py");
    let mut child = Command::new("python3")
        .args(["-B", peer, "--replay", "--channels", "3", "--boot", "48879", "--name", "bay cart drivers"])
        .args(["--silence-ms", "400", "--ramp-max-ms", "600", "--tokens", &tokens])
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .spawn()
        .unwrap_or_else(|why| panic!("python3 is needed for this test: {why}"));
    let mut input = child.stdin.take().unwrap();
    let lines = history.lines.join("\n");
    let writer = std::thread::spawn(move || writeln!(input, "{lines}").unwrap());
    let output = child.wait_with_output().unwrap();
    writer.join().unwrap();
    assert!(output.status.success(), "the peer failed");
    String::from_utf8(output.stdout).unwrap().lines().map(str::to_owned).collect()
}

fn line(now_us: u64, measured: &Measured, heard: &[u8]) -> String {
    let bits: Vec<&str> = [
        (status::OVER_CURRENT, "over-current"),
        (status::OVER_TEMPERATURE, "over-temperature"),
        (status::UNDER_VOLTAGE, "under-voltage"),
        (status::ENCODER, "encoder"),
        (status::SCALED, "scaled"),
    ]
    .into_iter()
    .filter(|(bit, _)| measured.bits & bit != 0)
    .map(|(_, name)| name)
    .collect();
    serde_json::json!({
        "at_us": now_us,
        "angles": measured.channels.iter().map(|c| c.angle).collect::<Vec<_>>(),
        "speeds": measured.channels.iter().map(|c| c.speed).collect::<Vec<_>>(),
        "yaw": measured.yaw_rate.unwrap_or(0),
        "yaw_valid": measured.yaw_rate.is_some(),
        "supply_mv": measured.supply_mv,
        "bits": bits,
        "stop_input": measured.stop_input_open,
        "hex": hex(heard),
    })
    .to_string()
}

fn plain_line(now_us: u64, measured: &Measured, heard: &[u8]) -> String {
    let channels: String = measured.channels.iter().map(|it| format!(" {} {}", it.angle, it.speed)).collect();
    let heard = if heard.is_empty() { "-".to_owned() } else { hex(heard) };
    format!(
        "{now_us} {} {} {} {} {}{channels} {heard}",
        u8::from(measured.stop_input_open),
        u8::from(measured.yaw_rate.is_some()),
        measured.yaw_rate.unwrap_or(0),
        measured.supply_mv,
        measured.bits
    )
}

fn transmit(driver: &mut Driver, now_us: u64, measured: &Measured, said: &mut Vec<u8>) {
    let mut frame = [0; MAX_ON_LINE];
    loop {
        let length = driver.transmit(now_us, measured, &mut frame);
        if length == 0 {
            return;
        }
        said.extend_from_slice(&frame[..length]);
    }
}

/// The token that a driver would say if its feedback were due.
fn token(driver: &Driver) -> u16 {
    let mut said = Vec::new();
    transmit(&mut driver.clone(), u64::from(u32::MAX), &Measured::default(), &mut said);
    feedback_in(&said).last().unwrap().1
}

/// Status and token of each Feedback.
fn feedback_in(said: &[u8]) -> Vec<(u16, u16)> {
    let mut deframer = Deframer::new();
    let mut found = Vec::new();
    for byte in said {
        if let Some(plain) = deframer.push(*byte) {
            match parse_from_drivers(plain.unwrap()).unwrap().1 {
                FromDrivers::Feedback(feedback) => found.push((feedback.status, feedback.token)),
                FromDrivers::Identity(_) => {}
            }
        }
    }
    found
}

fn hex(bytes: &[u8]) -> String {
    bytes.iter().map(|byte| format!("{byte:02x}")).collect()
}

/// SplitMix64, so that a failure can be made again from its seed.
struct Random(u64);

impl Random {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let z = (self.0 ^ (self.0 >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    fn below(&mut self, end: u64) -> u64 {
        self.next() % end
    }

    /// What the drivers hear in one step: mostly what a host would say, and all kinds of nonsense.
    fn bytes(&mut self, sequence: u8, token: u16) -> Vec<u8> {
        let speeds = |random: &mut Self, n: usize, on: bool| -> ArrayVec<i16, 29> {
            (0..n).map(|_| if on { random.next() as i16 } else { 0 }).collect()
        };
        let n = if self.below(30) == 0 { self.below(6) as usize } else { usize::from(CHANNELS) };
        let valid_ms = if self.below(30) == 0 { 401 } else { self.below(120) as u16 };
        let ramp_ms = self.below(800) as u16;
        let drive = |mode, speeds| ToDrivers::Drive(Drive { mode, valid_ms, ramp_ms, speeds });
        let message = match self.below(24) {
            0..=2 => drive(Mode::Park, speeds(self, n, false)),
            3..=6 => drive(Mode::Hold, speeds(self, n, false)),
            7..=12 => drive(Mode::Run, speeds(self, n, true)),
            13 => ToDrivers::Stop { ramp_ms: ramp_ms * u16::from(self.below(4) > 0) },
            14..=16 => ToDrivers::Clear { token },
            17 => ToDrivers::Clear { token: self.next() as u16 },
            18 => ToDrivers::Ask,
            19 => drive(Mode::Hold, speeds(self, n, true)), // speeds where there can be none
            20 => {
                let length = self.below(300) as usize;
                return (0..length).map(|_| self.next() as u8 & 0x7f).chain([0]).collect();
            }
            21 => return vec![0; self.below(3) as usize],
            _ => return Vec::new(),
        };
        let mut frame = [0; MAX_ON_LINE];
        let length = emit_to_drivers(sequence, &message, &mut frame);
        let mut bytes = frame[..length].to_vec();
        match self.below(20) {
            0 => {
                let at = self.below(length as u64) as usize;
                bytes[at] ^= 1 << self.below(8);
            }
            1 => bytes.truncate(self.below(length as u64) as usize),
            2 => bytes.extend_from_within(..),
            _ => {}
        }
        bytes
    }
}
