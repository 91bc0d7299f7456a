//! The line's format against bytes that were computed without this program, and against every kind of damage.
#![expect(clippy::unwrap_used, reason = "a test says what went wrong by stopping")]

use arrayvec::ArrayString;
use gripline::wire::driver::{Driver, Measured};
use gripline::wire::{
    ChannelState, Deframer, Drive, Feedback, FromDrivers, Identity, MAX_CHANNELS, MAX_ON_LINE, Mode,
    PerChannel, ToDrivers, WireError, emit_from_drivers, emit_to_drivers, parse_from_drivers,
    parse_to_drivers,
};
use proptest::prelude::*;

// The expected bytes were computed by a few lines of Python written from the format's description alone, with a
// bitwise CRC-32/ISCSI (check value 0xE3069283 for "123456789": catalogue of parametrised CRC algorithms) and a COBS
// coder after Cheshire & Baker 1999.
fn golden_to_drivers() -> Vec<(u8, ToDrivers, Vec<u8>)> {
    let drive = |mode, valid_ms, ramp_ms, speeds: &[i16]| {
        ToDrivers::Drive(Drive { mode, valid_ms, ramp_ms, speeds: speeds.iter().copied().collect() })
    };
    vec![
        (7, ToDrivers::Ask, vec![0x07, 0x01, 0x07, 0x4e, 0x8b, 0x09, 0x36, 0x00]),
        (
            8,
            drive(Mode::Run, 100, 350, &[1000, -1000, 32767, -32768]),
            vec![
                0x05, 0x02, 0x08, 0x02, 0x64, 0x0a, 0x5e, 0x01, 0x04, 0xe8, 0x03, 0x18, 0xfc, 0xff, 0x7f,
                0x06, 0x80, 0x77, 0xf9, 0xc3, 0x3b, 0x00,
            ],
        ),
        (
            255,
            drive(Mode::Park, 65535, 0, &[0, 0, 0]),
            vec![
                0x03, 0x02, 0xff, 0x03, 0xff, 0xff, 0x01, 0x02, 0x03, 0x01, 0x01, 0x01, 0x01, 0x01, 0x05,
                0x3e, 0x81, 0x60, 0xbb, 0x00,
            ],
        ),
        (
            9,
            ToDrivers::Stop { ramp_ms: 350 },
            vec![0x09, 0x03, 0x09, 0x5e, 0x01, 0x49, 0x48, 0x37, 0x71, 0x00],
        ),
        (
            10,
            ToDrivers::Clear { token: 0xbeef },
            vec![0x09, 0x04, 0x0a, 0xef, 0xbe, 0x10, 0x0e, 0x30, 0xc6, 0x00],
        ),
    ]
}

fn golden_from_drivers() -> Vec<(u8, FromDrivers, Vec<u8>)> {
    let identity = Identity {
        version: 1,
        flags: 7,
        channels: 4,
        speed_lsb_urad_s: 2000,
        angle_lsb_urad: 500,
        silence_ms: 200,
        ramp_max_ms: 3000,
        boot: 0x1234,
        name: ArrayString::from("bay cart drivers").unwrap(),
    };
    let feedback = Feedback {
        ack: 8,
        status: 0x0180,
        token: 0xbeef,
        boot: 0x1234,
        clock_us: 0x89ab_cdef,
        supply_mv: 24150,
        yaw_rate: -2048,
        refused: 2,
        channels: [ChannelState { angle: -100_000, speed: -7 }, ChannelState { angle: i32::MAX, speed: 0 }]
            .into_iter()
            .collect(),
    };
    vec![
        (
            0,
            FromDrivers::Identity(identity),
            vec![
                0x02, 0x81, 0x06, 0x01, 0x07, 0x04, 0xd0, 0x07, 0x01, 0x03, 0xf4, 0x01, 0x01, 0x02, 0xc8,
                0x19, 0xb8, 0x0b, 0x34, 0x12, 0x62, 0x61, 0x79, 0x20, 0x63, 0x61, 0x72, 0x74, 0x20, 0x64,
                0x72, 0x69, 0x76, 0x65, 0x72, 0x73, 0xe7, 0xd2, 0xed, 0x25, 0x00,
            ],
        ),
        (
            3,
            FromDrivers::Feedback(feedback),
            vec![
                0x10, 0x82, 0x03, 0x08, 0x80, 0x01, 0xef, 0xbe, 0x34, 0x12, 0xef, 0xcd, 0xab, 0x89, 0x56,
                0x5e, 0x03, 0xf8, 0x02, 0x0c, 0x02, 0x60, 0x79, 0xfe, 0xff, 0xf9, 0xff, 0xff, 0xff, 0xff,
                0x7f, 0x01, 0x05, 0x54, 0x5a, 0xf4, 0xc6, 0x00,
            ],
        ),
    ]
}

fn deframed(bytes: &[u8]) -> Vec<Result<Vec<u8>, WireError>> {
    let mut deframer = Deframer::new();
    bytes.iter().filter_map(|&byte| deframer.push(byte).map(|it| it.map(<[u8]>::to_vec))).collect()
}

#[test]
fn every_kind_gives_its_golden_bytes_and_back() {
    for (sequence, message, bytes) in golden_to_drivers() {
        let mut out = [0xa5; MAX_ON_LINE];
        let len = emit_to_drivers(sequence, &message, &mut out);
        assert_eq!(out[..len], bytes, "{message:?}");
        let plain = deframed(&bytes).remove(0).unwrap();
        assert_eq!(parse_to_drivers(&plain), Ok((sequence, message)));
    }
    for (sequence, message, bytes) in golden_from_drivers() {
        let mut out = [0xa5; MAX_ON_LINE];
        let len = emit_from_drivers(sequence, &message, &mut out);
        assert_eq!(out[..len], bytes, "{message:?}");
        let plain = deframed(&bytes).remove(0).unwrap();
        assert_eq!(parse_from_drivers(&plain), Ok((sequence, message)));
    }
}

#[test]
fn a_frame_of_one_direction_is_unknown_in_the_other() {
    for (_, _, bytes) in golden_to_drivers() {
        let plain = deframed(&bytes).remove(0).unwrap();
        assert!(matches!(parse_from_drivers(&plain), Err(WireError::UnknownKind(_))));
    }
    for (_, _, bytes) in golden_from_drivers() {
        let plain = deframed(&bytes).remove(0).unwrap();
        assert!(matches!(parse_to_drivers(&plain), Err(WireError::UnknownKind(_))));
    }
}

#[test]
fn the_largest_frames_fit() {
    let speeds: PerChannel<i16> = (0..MAX_CHANNELS).map(|i| i16::try_from(i).unwrap() - 7).collect();
    let drive = ToDrivers::Drive(Drive { mode: Mode::Run, valid_ms: 1, ramp_ms: 2, speeds });
    let channels = (0..MAX_CHANNELS).map(|_| ChannelState { angle: -1, speed: -1 }).collect();
    let feedback = FromDrivers::Feedback(Feedback { channels, ..Feedback::default() });
    let mut out = [0; MAX_ON_LINE];
    let len = emit_to_drivers(1, &drive, &mut out);
    assert_eq!(parse_to_drivers(deframed(&out[..len])[0].as_ref().unwrap()).unwrap().1, drive);
    let len = emit_from_drivers(1, &feedback, &mut out);
    assert_eq!(len - 2, 2 + 18 + 6 * MAX_CHANNELS + 4, "29 channels are what 200 bytes hold");
    assert_eq!(parse_from_drivers(deframed(&out[..len])[0].as_ref().unwrap()).unwrap().1, feedback);
}

#[test]
fn empty_frames_and_overlong_ones_do_not_disturb_the_next() {
    let (_, message, frame) = golden_to_drivers().remove(1);
    let mut line = vec![0, 0, 0];
    line.extend([0x55; 5000]);
    line.push(0);
    line.extend(&frame);
    let got = deframed(&line);
    assert_eq!(got[0], Err(WireError::Overlong));
    assert_eq!(parse_to_drivers(got[1].as_ref().unwrap()).unwrap().1, message);
}

#[test]
fn a_frame_cut_at_any_byte_is_dropped_and_the_next_is_taken() {
    for (sequence, message, frame) in golden_from_drivers() {
        for cut in 1..frame.len() {
            let mut line = frame[..cut].to_vec();
            line.push(0);
            line.extend(&frame);
            let taken: Vec<_> =
                deframed(&line).into_iter().filter_map(|it| parse_from_drivers(&it.ok()?).ok()).collect();
            // Cut before its own end mark, the first is whole too.
            let whole = if cut == frame.len() - 1 { 2 } else { 1 };
            assert_eq!(taken, vec![(sequence, message.clone()); whole], "cut at {cut}");
        }
    }
}

/// SplitMix64 (Steele, Lea, Flood 2014; constants from memory): a seeded source without a dependency on its version.
struct Seeded(u64);
impl Seeded {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }
    fn below(&mut self, n: usize) -> usize {
        usize::try_from(self.next() % u64::try_from(n).unwrap()).unwrap()
    }
}

/// How many corruptions: a few in CI, 10^8 by `GRIPLINE_CORRUPTIONS=100000000 cargo test --release --test wire`.
fn corruptions() -> u64 {
    std::env::var("GRIPLINE_CORRUPTIONS").map_or(1_000_000, |n| n.parse().unwrap())
}

#[test]
fn no_corrupted_frame_is_accepted_as_another() {
    let frames: Vec<Vec<u8>> = golden_to_drivers().into_iter().map(|it| it.2).collect();
    let mut seeded = Seeded(1);
    let mut taken_damaged = 0_u64;
    for round in 0..corruptions() {
        let original = &frames[seeded.below(frames.len())];
        let mut bytes: arrayvec::ArrayVec<u8, 64> = original.iter().copied().collect();
        match seeded.below(4) {
            0 => {
                for _ in 0..=seeded.below(6) {
                    let at = seeded.below(bytes.len());
                    bytes[at] ^= 1 << seeded.below(8);
                }
            }
            1 => {
                let (from, len) = (seeded.below(bytes.len()), 1 + seeded.below(4));
                for byte in bytes.iter_mut().skip(from).take(len) {
                    *byte = u8::try_from(seeded.below(256)).unwrap();
                }
            }
            2 => {
                bytes.remove(seeded.below(bytes.len()));
            }
            _ => {
                let other = &frames[seeded.below(frames.len())];
                let (head, tail) = (seeded.below(bytes.len()), seeded.below(other.len()));
                bytes.truncate(head);
                bytes.extend(other[tail..].iter().copied());
            }
        }
        let mut deframer = Deframer::new();
        for &byte in &bytes {
            if let Some(Ok(plain)) = deframer.push(byte)
                && let Ok((sequence, message)) = parse_to_drivers(plain)
            {
                // What is taken must be one of the frames that really were on the line, to the byte.
                let mut out = [0; MAX_ON_LINE];
                let len = emit_to_drivers(sequence, &message, &mut out);
                if !frames.iter().any(|frame| frame[..] == out[..len]) {
                    taken_damaged += 1;
                    eprintln!("round {round}: {bytes:02x?} was taken as {message:?}");
                }
            }
        }
    }
    assert_eq!(taken_damaged, 0);
}

proptest! {
    #[test]
    fn any_bytes_in_any_chunking_give_the_same_frames(
        noise in prop::collection::vec(any::<u8>(), 0..600),
        cuts in prop::collection::vec(0_usize..600, 0..8),
    ) {
        let whole = deframed(&noise);
        let mut deframer = Deframer::new();
        let mut pieces = Vec::new();
        let mut cuts: Vec<usize> = cuts.into_iter().map(|it| it.min(noise.len())).collect();
        cuts.extend([0, noise.len()]);
        cuts.sort_unstable();
        for pair in cuts.windows(2) {
            for &byte in &noise[pair[0]..pair[1]] {
                if let Some(it) = deframer.push(byte) {
                    pieces.push(it.map(<[u8]>::to_vec));
                }
            }
        }
        prop_assert_eq!(whole.clone(), pieces);
        for plain in whole.into_iter().flatten() {
            let _ = (parse_to_drivers(&plain), parse_from_drivers(&plain));
        }
    }

    #[test]
    fn what_is_emitted_is_parsed_back(
        sequence: u8, run: bool, valid_ms: u16, ramp_ms: u16,
        speeds in prop::collection::vec(any::<i16>(), 0..=MAX_CHANNELS),
    ) {
        let mode = if run { Mode::Run } else { Mode::Hold };
        let speeds = speeds.into_iter().map(|it| if run { it } else { 0 }).collect();
        let message = ToDrivers::Drive(Drive { mode, valid_ms, ramp_ms, speeds });
        let mut out = [0; MAX_ON_LINE];
        let len = emit_to_drivers(sequence, &message, &mut out);
        prop_assert!(!out[..len - 1].contains(&0));
        let got = deframed(&out[..len]);
        prop_assert_eq!(got.len(), 1);
        prop_assert_eq!(parse_to_drivers(got[0].as_ref().unwrap()), Ok((sequence, message)));
    }
}

#[test]
fn motion_outside_run_is_no_frame() {
    let mut speeds = PerChannel::new();
    speeds.push(1);
    for mode in [Mode::Park, Mode::Hold] {
        let message = ToDrivers::Drive(Drive { mode, valid_ms: 100, ramp_ms: 100, speeds: speeds.clone() });
        let mut out = [0; MAX_ON_LINE];
        let len = emit_to_drivers(0, &message, &mut out);
        match parse_to_drivers(deframed(&out[..len])[0].as_ref().unwrap()) {
            Err(WireError::Value { .. }) => {}
            other => panic!("taken: {other:?}"),
        }
    }
}

/// Two channels, just started.
fn two_channels() -> Driver {
    let identity = Identity {
        version: 1,
        flags: 0,
        channels: 2,
        speed_lsb_urad_s: 1000,
        angle_lsb_urad: 1000,
        silence_ms: 1000,
        ramp_max_ms: 1000,
        boot: 1,
        name: ArrayString::new(),
    };
    Driver::new(identity, 0)
}

fn tell(driver: &mut Driver, message: &ToDrivers, now_us: u64) {
    let mut bytes = [0; MAX_ON_LINE];
    let length = emit_to_drivers(7, message, &mut bytes);
    bytes[..length].iter().for_each(|it| driver.receive(*it, now_us));
}

fn drive(mode: Mode) -> ToDrivers {
    let speed = if mode == Mode::Run { 100 } else { 0 };
    ToDrivers::Drive(Drive {
        mode,
        valid_ms: 500,
        ramp_ms: 100,
        speeds: [speed, speed].into_iter().collect(),
    })
}

/// Only Clear ends a latch: a Park, a Hold and a Run are refused, and nothing is told to turn.
#[test]
fn a_latched_driver_takes_no_drive_of_any_mode() {
    let mut driver = two_channels();
    for mode in [Mode::Park, Mode::Hold, Mode::Run] {
        tell(&mut driver, &drive(mode), 1000);
    }
    assert_eq!(driver.command(1000).speeds[0], 100);
    tell(&mut driver, &ToDrivers::Stop { ramp_ms: 10 }, 2000);
    for (now_us, mode) in (20_000..).step_by(1000).zip([Mode::Park, Mode::Hold, Mode::Run, Mode::Run]) {
        tell(&mut driver, &drive(mode), now_us);
        assert!(driver.latched(), "{mode:?}");
        assert_eq!(driver.command(now_us).speeds[0], 0);
    }
}

#[test]
fn only_the_present_token_clears_and_only_after_the_ramp() {
    let mut driver = two_channels();
    for mode in [Mode::Park, Mode::Hold, Mode::Run] {
        tell(&mut driver, &drive(mode), 1000);
    }
    tell(&mut driver, &ToDrivers::Stop { ramp_ms: 10 }, 2000);
    let mut bytes = [0; MAX_ON_LINE];
    let length = driver.transmit(3000, &Measured::default(), &mut bytes);
    let plain = deframed(&bytes[..length]).remove(0).unwrap();
    let Ok((_, FromDrivers::Feedback(feedback))) = parse_from_drivers(&plain) else {
        unreachable!("feedback is owed")
    };
    let token = feedback.token;
    tell(&mut driver, &ToDrivers::Clear { token }, 11_999);
    assert!(driver.latched(), "the ramp is not over");
    for wrong in (0..=u16::MAX).filter(|it| *it != token) {
        tell(&mut driver, &ToDrivers::Clear { token: wrong }, 12_000);
        assert!(driver.latched(), "{wrong} is not {token}");
    }
    tell(&mut driver, &ToDrivers::Clear { token }, 12_000);
    assert!(!driver.latched());
}

/// Each step is taken only from the one before it.
#[test]
fn nothing_turns_without_a_park_and_a_hold_before() {
    let mut driver = two_channels();
    for mode in [Mode::Run, Mode::Hold, Mode::Run, Mode::Park, Mode::Run] {
        tell(&mut driver, &drive(mode), 1000);
        assert_eq!((driver.command(1000).torque, driver.command(1000).speeds[0]), (false, 0), "{mode:?}");
    }
    for mode in [Mode::Hold, Mode::Run] {
        tell(&mut driver, &drive(mode), 1000);
        assert!(driver.command(1000).torque);
    }
    assert_eq!(driver.command(1000).speeds[0], 100);
}
