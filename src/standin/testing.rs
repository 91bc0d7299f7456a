//! What the tests of the stand-in share: a base of an invented kind, and a host that speaks to it.

use arrayvec::ArrayVec;

use super::sim::{Sim, SimSettings};
use crate::base::{PerWheel, Twist};
use crate::config::{Plan, parse};
use crate::units::Mono;
use crate::wire::{
    Deframer, Drive, Feedback, FromDrivers, Identity, MAX_ON_LINE, Mode, ToDrivers, emit_to_drivers,
    parse_from_drivers,
};

pub(super) const LSB_RAD_S: f64 = 0.002;

/// Four mecanum wheels on an oblong; the two rear ones hang on a second link, reversed and geared, with a channel
/// between them that turns nothing.
const CONFIG: &str = r#"
base = { name = "hay barrow", outline_m = [0.6, 0.8] }
wheel = [
    { name = "front left", at_m = [0.20, 0.15], roller_deg = -45.0, link = "front", channel = 0, WHEEL },
    { name = "front right", at_m = [0.20, -0.15], roller_deg = 45.0, link = "front", channel = 1, WHEEL },
    { name = "rear left", at_m = [-0.20, 0.15], roller_deg = 45.0, link = "rear", channel = 0, WHEEL, REAR },
    { name = "rear right", at_m = [-0.20, -0.15], roller_deg = -45.0, link = "rear", channel = 2, WHEEL, REAR },
]
link = [
    { name = "front", port = "/dev/ttyS8", expect = "front drivers", channels = 2, LINK },
    { name = "rear", port = "/dev/ttyS9", expect = "rear drivers", channels = 3, LINK },
]
pace = [{ name = "creep", travel_m_s = 0.25, turn_rad_s = 0.6 }]
"#;

pub(super) fn plan() -> Plan {
    let text = CONFIG
        .replace("WHEEL", "drive_deg = 0.0, radius_m = 0.05, max_rad_s = 24.0, max_rad_s2 = 120.0")
        .replace("REAR", "reversed = true, gear = 2.0")
        .replace("LINK", "baud = 460800, valid_ms = 100, speed_lsb_urad_s = 2000, angle_lsb_urad = 500");
    match parse(&text, "base.toml") {
        Ok((plan, _)) => plan,
        Err(mistakes) => {
            panic!("{}", mistakes.iter().map(ToString::to_string).collect::<Vec<_>>().join("\n"))
        }
    }
}

/// No noise, no bias, no lag and no dead time: what is left can be worked out with a pencil.
pub(super) fn ideal() -> SimSettings {
    SimSettings {
        lag_s: 0.0,
        dead_time_s: 0.0,
        gyro_bias_rad_s: 0.0,
        gyro_noise_rad_s: 0.0,
        ..SimSettings::default()
    }
}

/// Speaks to a [`Sim`] every five milliseconds, as a drive does, and keeps what it says.
pub(super) struct Host {
    pub(super) sim: Sim,
    pub(super) plan: Plan,
    pub(super) now: Mono,
    /// What is sent at each tick; `None`: nothing.
    pub(super) drive: Option<(Mode, PerWheel<f64>)>,
    pub(super) valid_ms: u16,
    pub(super) ramp_ms: u16,
    pub(super) sequence: u8,
    deframers: Vec<Deframer>,
    /// Everything heard, with the time and the link.
    pub(super) heard: Vec<(Mono, usize, FromDrivers)>,
    pub(super) garbled: usize,
}

impl Host {
    pub(super) fn new(seed: u64, settings: SimSettings) -> Self {
        let plan = plan();
        let mut sim = Sim::new(&plan, seed, settings);
        let now = Mono::from_ns(7_000_000_000);
        sim.step(now);
        Self {
            sim,
            now,
            drive: None,
            valid_ms: 100,
            ramp_ms: 500,
            sequence: 0,
            deframers: plan.links.iter().map(|_| Deframer::new()).collect(),
            plan,
            heard: Vec::new(),
            garbled: 0,
        }
    }

    /// A host whose drivers run at a twist, through park and hold.
    pub(super) fn running(seed: u64, settings: SimSettings, twist: Twist) -> Self {
        let mut host = Self::new(seed, settings);
        host.set(Mode::Park, Twist::ZERO);
        host.run_ms(20);
        host.set(Mode::Hold, Twist::ZERO);
        host.run_ms(20);
        host.set(Mode::Run, twist);
        host
    }

    pub(super) fn set(&mut self, mode: Mode, twist: Twist) {
        self.drive = Some((mode, self.plan.layout.wheel_speeds(twist)));
    }

    pub(super) fn run_ms(&mut self, ms: u64) {
        for _ in 0..ms {
            if (self.now.ns() / 1_000_000).is_multiple_of(5)
                && let Some((mode, speeds)) = self.drive.clone()
            {
                for link in 0..self.plan.links.len() {
                    let drive = self.drive_frame(link, mode, &speeds);
                    self.send(link, &ToDrivers::Drive(drive));
                }
                self.sequence = self.sequence.wrapping_add(1);
            }
            self.now = self.now.plus_ns(1_000_000);
            self.sim.step(self.now);
            self.listen();
        }
    }

    pub(super) fn send(&mut self, link: usize, message: &ToDrivers) {
        let mut frame = [0; MAX_ON_LINE];
        let length = emit_to_drivers(self.sequence, message, &mut frame);
        self.sim.bytes_in(link, &frame[..length]);
        self.listen();
    }

    pub(super) fn send_all(&mut self, message: &ToDrivers) {
        for link in 0..self.plan.links.len() {
            self.send(link, message);
        }
    }

    pub(super) fn listen(&mut self) {
        for link in 0..self.plan.links.len() {
            let mut bytes = Vec::new();
            self.sim.bytes_out(link, &mut bytes);
            for byte in bytes {
                match self.deframers[link].push(byte).map(|plain| plain.and_then(parse_from_drivers)) {
                    None => {}
                    Some(Ok((_, message))) => self.heard.push((self.now, link, message)),
                    Some(Err(_)) => self.garbled += 1,
                }
            }
        }
    }

    /// The newest Feedback of a link.
    pub(super) fn feedback(&self, link: usize) -> Feedback {
        let found = self.heard.iter().rev().find_map(|(_, from, message)| match message {
            FromDrivers::Feedback(feedback) if *from == link => Some(feedback.clone()),
            FromDrivers::Feedback(_) | FromDrivers::Identity(_) => None,
        });
        found.expect("no feedback yet")
    }

    pub(super) fn identity(&mut self, link: usize) -> Identity {
        self.send(link, &ToDrivers::Ask);
        let found = self.heard.iter().rev().find_map(|(_, from, message)| match message {
            FromDrivers::Identity(identity) if *from == link => Some(identity.clone()),
            FromDrivers::Feedback(_) | FromDrivers::Identity(_) => None,
        });
        found.expect("no identity")
    }

    fn drive_frame(&self, link: usize, mode: Mode, speeds: &PerWheel<f64>) -> Drive {
        let mut counts: ArrayVec<i16, 29> = (0..self.plan.links[link].channels).map(|_| 0).collect();
        for (wheel, speed) in self.plan.wheels.iter().zip(speeds).filter(|(wheel, _)| wheel.link == link) {
            let sign = if wheel.reversed { -1.0 } else { 1.0 };
            counts[usize::from(wheel.channel)] = (sign * speed * wheel.gear / LSB_RAD_S).round() as i16;
        }
        Drive { mode, valid_ms: self.valid_ms, ramp_ms: self.ramp_ms, speeds: counts }
    }
}
