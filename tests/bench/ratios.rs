//! Speed, each figure beside its floor, measured in one run: `cargo bench`. Prints ratios; fails nothing, since this
//! machine and the next are not alike. The floors are what the same machine does at least for such a job.
#![expect(clippy::unwrap_used, reason = "a benchmark says what went wrong by stopping")]

mod running;

use std::hint::black_box;
use std::os::fd::AsFd;

use gripline::base::{PerWheel, Twist};
use gripline::config::{EXAMPLE, Plan, parse};
use gripline::core::io::{Buttons, Heard, LinkInput, PadInput, Puller};
use gripline::core::{Core, Inputs};
use gripline::shaping::Sticks;
use gripline::sys::{clock, sched, tty};
use gripline::units::Mono;
use gripline::wire::{
    ChannelState, Deframer, Drive, Feedback, Identity, MAX_ON_LINE, Mode, ToDrivers, emit_to_drivers,
    parse_to_drivers, status, stop_on_line, stop_plain,
};

/// Nanoseconds a call: the median of several batches, so that a hiccup does not count.
fn ns(mut it: impl FnMut()) -> f64 {
    let calls = 20_000;
    let mut batches: Vec<f64> = (0..15)
        .map(|_| {
            let began = clock::now();
            for _ in 0..calls {
                it();
            }
            clock::now().since_ns(began) as f64 / f64::from(calls)
        })
        .collect();
    batches.sort_by(f64::total_cmp);
    batches[batches.len() / 2]
}

fn row(what: &str, measured: &str, floor: &str, ratio: f64, reach: &str) {
    println!("{what:<46} {measured:>12}  {floor:<44} {ratio:>8.2} x  reach {reach}");
}

/// A plan with so many omni wheels on a circle.
fn ring(wheels: usize) -> Plan {
    let mut text = String::from("[base]\nname = \"ring\"\noutline_m = [1.0, 1.0]\n");
    for i in 0..wheels {
        let angle = std::f64::consts::TAU * i as f64 / wheels as f64;
        text += &format!(
            "[[wheel]]\nname = \"w{i}\"\nat_m = [{:.6}, {:.6}]\ndrive_deg = {:.6}\nroller_deg = 0.0\nradius_m = 0.05\n\
             max_rad_s = 24.0\nmax_rad_s2 = 120.0\nlink = \"base\"\nchannel = {i}\n",
            0.4 * angle.cos(),
            0.4 * angle.sin(),
            (angle.to_degrees() + 90.0).rem_euclid(360.0)
        );
    }
    text += &format!(
        "[[link]]\nname = \"base\"\nport = \"/dev/null\"\nbaud = 3000000\nexpect = \"ring\"\nchannels = {wheels}\nspeed_lsb_urad_s = 2000\nangle_lsb_urad = 500\n[[pace]]\nname = \"p\"\ntravel_m_s = 0.4\nturn_rad_s = 0.8\n"
    );
    parse(&text, "ring").map_err(|it| it[0].to_string()).unwrap().0
}

/// A core in Driving in the room's frame, and the inputs that keep it there, one tick after the other.
struct Moving {
    core: Core,
    inputs: Inputs,
    period_ns: u64,
    ack: u8,
}

impl Moving {
    fn new(plan: &Plan) -> Self {
        let link = &plan.links[0];
        let identity = Identity {
            version: 1,
            flags: 0,
            channels: link.channels,
            speed_lsb_urad_s: link.speed_lsb_urad_s,
            angle_lsb_urad: link.angle_lsb_urad,
            silence_ms: 1000,
            ramp_max_ms: 60_000,
            boot: 1,
            name: arrayvec::ArrayString::from(&link.expect).unwrap(),
        };
        let mut inputs = Inputs::default();
        inputs.links.push(LinkInput {
            open: true,
            openings: 1,
            identity: Some(identity),
            unsent: Some(0),
            ..LinkInput::default()
        });
        inputs.pad = PadInput { present: true, streams: true, ..PadInput::default() };
        let mut it = Self { core: Core::new(plan), inputs, period_ns: plan.tick.period_ns(), ack: 0 };
        for _ in 0..100 {
            it.tick(0);
        }
        for (press, hold, ticks) in
            [(Buttons::READY, 0.0, 5), (Buttons::FRAME, 0.0, 5), (Buttons::default(), 1.0, 5)]
        {
            it.inputs.pad.pressed = press;
            it.inputs.pad.hold = hold;
            it.inputs.pad.hold_least = hold;
            for _ in 0..ticks {
                it.tick(0);
                it.inputs.pad.pressed = Buttons::default();
            }
        }
        it.inputs.pad.sticks = Sticks { x: 0.8, y: 0.3, turn: 0.5 };
        it
    }

    fn tick(&mut self, torque: u16) -> gripline::core::Outputs {
        self.inputs.now = Mono::from_ns(self.inputs.now.ns() + self.period_ns);
        self.inputs.due = self.inputs.now;
        self.inputs.pad.last_sign = self.inputs.now;
        let out = self.core.step(&self.inputs);
        if let Some(last) = out.frames.last() {
            self.ack = last.sequence;
        }
        let link = &mut self.inputs.links[0];
        link.identity = None;
        let channels = out.frames.iter().find_map(|it| match &it.message {
            ToDrivers::Drive(drive) => {
                Some(drive.speeds.iter().map(|speed| ChannelState { angle: 0, speed: *speed }).collect())
            }
            ToDrivers::Ask | ToDrivers::Stop { .. } | ToDrivers::Clear { .. } => None,
        });
        link.feedback = Some(Heard {
            at: self.inputs.now,
            feedback: Feedback {
                ack: self.ack,
                status: torque & status::TORQUE_ON,
                boot: 1,
                clock_us: u32::try_from(self.inputs.now.ns() / 1000 % (1 << 32)).unwrap(),
                channels: channels.unwrap_or_else(|| {
                    let n = link.feedback.as_ref().map_or(0, |it| it.feedback.channels.len());
                    (0..n).map(|_| ChannelState::default()).collect()
                }),
                ..Feedback::default()
            },
        });
        out
    }
}

fn step_ns(plan: &Plan) -> (f64, f64) {
    let mut moving = Moving::new(plan);
    let phase = moving.tick(status::TORQUE_ON).phase;
    assert_eq!(phase, gripline::core::Phase::Driving, "the benchmark does not drive");
    let step = ns(|| {
        black_box(moving.tick(status::TORQUE_ON));
    });
    let layout = &plan.layout;
    let multiply = ns(|| {
        black_box(layout.wheel_speeds(black_box(Twist::new(0.4, 0.3, 0.1))));
    });
    (step, multiply)
}

fn core_step() {
    let (step, multiply) = step_ns(&parse(EXAMPLE, "example").unwrap().0);
    row(
        "core step, 4 wheels, room frame",
        &format!("{step:.0} ns"),
        &format!("bare H V multiply {multiply:.1} ns"),
        step / multiply,
        "below 2000 ns",
    );
    let (few, many) = (step_ns(&ring(4)).0, step_ns(&ring(28)).0);
    row(
        "core step, 28 wheels",
        &format!("{many:.0} ns"),
        &format!("4 wheels {few:.0} ns"),
        many / few,
        "7 (linear)",
    );
}

fn frames() {
    let speeds: gripline::wire::PerChannel<i16> = [1000, -1000, 2000, -2000].into_iter().collect();
    let message = ToDrivers::Drive(Drive { mode: Mode::Run, valid_ms: 100, ramp_ms: 300, speeds });
    let mut bytes = [0; MAX_ON_LINE];
    let len = emit_to_drivers(1, &message, &mut bytes);
    let both = ns(|| {
        let mut bytes = [0; MAX_ON_LINE];
        let len = emit_to_drivers(1, black_box(&message), &mut bytes);
        let mut deframer = Deframer::new();
        for byte in &bytes[..len] {
            if let Some(Ok(plain)) = deframer.push(*byte) {
                black_box(parse_to_drivers(plain).unwrap());
            }
        }
    });
    let crc = crc::Crc::<u32, crc::Table<16>>::new(&crc::CRC_32_ISCSI);
    let floor = ns(|| {
        black_box(crc.checksum(black_box(&bytes[..len])));
        black_box(crc.checksum(black_box(&bytes[..len])));
    });
    row(
        "frame encode and decode, 4 channels",
        &format!("{both:.0} ns"),
        &format!("CRC alone, both ways {floor:.0} ns"),
        both / floor,
        "3",
    );
}

/// From a byte that can be read on one device to a stop on another: the stop line against a bare read and write.
fn stop_line() {
    let mut plan = parse(EXAMPLE, "example").unwrap().0;
    let (master, slave) = tty::open_pty().unwrap();
    plan.links[0].port = slave;
    let links = gripline::link::start(&plan, false, std::sync::Arc::new(|_, _, _, _| {})).unwrap();
    tty::set_nonblocking(&master).unwrap();
    let mut sink = [0; 4096];
    let bytes = stop_on_line(stop_plain(0, 300));
    let (bare_master, bare_slave) = tty::open_pty().unwrap();
    let (bare, _) = gripline::link::open("bare", &bare_slave, 115_200).unwrap();
    tty::set_nonblocking(&bare_master).unwrap();
    let floor = ns(|| {
        let _ = tty::write(bare.as_fd(), &bytes);
        let _ = tty::read(bare_master.as_fd(), &mut sink);
    });
    let mut sink = [0; 4096];
    let pull = ns(|| {
        links.stop.pull(Puller::PadStop);
        let _ = tty::read(master.as_fd(), &mut sink);
    });
    row(
        "stop line pulled, to its bytes readable",
        &format!("{pull:.0} ns"),
        &format!("bare write and read {floor:.0} ns"),
        pull / floor,
        "2",
    );
}

/// How late the ticks of a running drive wake, against a bare sleep at the same priority, and with its console flooded.
fn running_drive(floor: (f64, f64)) {
    let Some(late) = running::measure() else {
        println!("a running drive: not measured, it did not start");
        return;
    };
    for (what, index, floor) in [("median", 0, floor.0), ("p99.9", 1, floor.1)] {
        let (alone, flooded) = (late.alone_us[index], late.flooded_us[index]);
        row(
            &format!("tick of a drive at 1 kHz, {what}"),
            &format!("{alone:.1} us"),
            &format!("bare sleep {floor:.1} us"),
            alone / floor,
            "1.2",
        );
        row(
            &format!("the same, console flooded, {what}"),
            &format!("{flooded:.1} us"),
            &format!("not flooded {alone:.1} us"),
            flooded / alone,
            "1 (not noticed)",
        );
    }
}

/// How late ticks wake at 1 kHz, against the same sleep without anything round it; gives the floor.
fn wake() -> (f64, f64) {
    let late = |work: &mut dyn FnMut()| {
        let period_ns = 1_000_000;
        let mut due = clock::now().plus_ns(period_ns);
        let mut late: Vec<u64> = (0..4000)
            .map(|_| {
                clock::sleep_until(due);
                let now = clock::now();
                work();
                let was = now.since_ns(due);
                due = due.plus_ns(period_ns);
                while due < clock::now() {
                    due = due.plus_ns(period_ns);
                }
                was
            })
            .collect();
        late.sort_unstable();
        (late[late.len() / 2] as f64 / 1e3, late[late.len() * 999 / 1000] as f64 / 1e3)
    };
    sched::no_timer_slack();
    let priority = if sched::set_realtime(40).is_ok() { "SCHED_FIFO 40" } else { "ordinary scheduling" };
    let mut moving = Moving::new(&parse(EXAMPLE, "example").unwrap().0);
    let floor = late(&mut || {});
    let ours = late(&mut || {
        black_box(moving.tick(status::TORQUE_ON));
    });
    row(
        "tick wake-up at 1 kHz, median",
        &format!("{:.1} us", ours.0),
        &format!("bare sleep, {priority} {:.1} us", floor.0),
        ours.0 / floor.0,
        "1.2",
    );
    row(
        "tick wake-up at 1 kHz, p99.9",
        &format!("{:.1} us", ours.1),
        &format!("bare sleep, {priority} {:.1} us", floor.1),
        ours.1 / floor.1,
        "1.2",
    );
    floor
}

/// Resident memory of a running drive, and how long it takes to its first frame on the line.
fn process() {
    let dir = tempfile::tempdir().unwrap();
    let config = dir.path().join("cart.toml");
    std::fs::write(&config, EXAMPLE).unwrap();
    let hands = dir.path().join("hands.csv");
    std::fs::write(&hands, "60,end,\n").unwrap();
    let (master, slave) = tty::open_pty().unwrap();
    let began = clock::now();
    let mut child = std::process::Command::new(env!("CARGO_BIN_EXE_gripline"))
        .arg("drive")
        .arg(&config)
        .arg("--port")
        .arg(&slave)
        .arg("--hands")
        .arg(&hands)
        .arg("--socket")
        .arg(dir.path().join("s"))
        .arg("--record-dir")
        .arg(dir.path())
        .stdout(std::process::Stdio::null())
        .stderr(std::process::Stdio::null())
        .spawn()
        .unwrap();
    let mut bytes = [0; 64];
    while tty::read(master.as_fd(), &mut bytes).is_err() {
        clock::sleep_until(clock::now().plus_ns(100_000));
    }
    let first_ms = clock::now().since_ns(began) as f64 / 1e6;
    clock::sleep_ms(1500);
    let status = std::fs::read_to_string(format!("/proc/{}/status", child.id())).unwrap();
    let rss = status
        .lines()
        .find(|it| it.starts_with("VmRSS"))
        .and_then(|it| it.split_whitespace().nth(1))
        .unwrap();
    let _ = child.kill();
    let _ = child.wait();
    let mib = rss.parse::<f64>().unwrap() / 1024.0;
    row("start to first frame", &format!("{first_ms:.0} ms"), "", first_ms / 100.0, "1 (100 ms)");
    row("resident memory of drive, locked", &format!("{mib:.1} MiB"), "", mib / 16.0, "1 (16 MiB)");
}

fn main() {
    let zero: PerWheel<f64> = PerWheel::new();
    black_box(zero);
    core_step();
    frames();
    stop_line();
    process();
    let floor = wake();
    running_drive(floor);
    println!("allocations in tick, link, record and stop path: 0, by test (tests/no_alloc*.rs)");
}
