//! What the tests of the stand-in share: a base of an invented kind, and a host that speaks to it.

use std::path::PathBuf;

use arrayvec::ArrayVec;

use super::sim::{Sim, SimSettings};
use crate::base::{Layout, PerWheel, Twist, Wheel};
use crate::config::*;
use crate::shaping::{Limits, Pace, Response, Saturation};
use crate::units::{Mono, rad};
use crate::wire::{
    Deframer, Drive, Feedback, FromDrivers, Identity, MAX_ON_LINE, Mode, ToDrivers, emit_to_drivers,
    parse_from_drivers,
};

pub(super) const LSB_RAD_S: f64 = 0.002;

/// Four mecanum wheels on an oblong; the two rear ones hang on a second link, reversed and geared.
pub(super) fn plan() -> Plan {
    let wheel = |name: &str, x_m, y_m, roller_deg, link, channel| WheelPlan {
        name: name.to_owned(),
        geometry: Wheel { x_m, y_m, drive_rad: 0.0, roller_rad: rad(roller_deg), radius_m: 0.05 },
        max_rad_s: 24.0,
        max_rad_s2: 120.0,
        link,
        channel,
        reversed: link == 1,
        gear: if link == 1 { 2.0 } else { 1.0 },
    };
    let wheels = vec![
        wheel("front left", 0.20, 0.15, -45.0, 0, 0),
        wheel("front right", 0.20, -0.15, 45.0, 0, 1),
        wheel("rear left", -0.20, 0.15, 45.0, 1, 0),
        wheel("rear right", -0.20, -0.15, -45.0, 1, 2),
    ];
    let link = |name: &str, channels| LinkPlan {
        name: name.to_owned(),
        port: PathBuf::from("/dev/null"),
        baud: 460_800,
        valid_ms: 100,
        expect: format!("{name} drivers"),
        channels,
        speed_lsb_urad_s: 2000,
        angle_lsb_urad: 500,
        fifo_bytes: 256,
        latency_ms: 16.0,
    };
    let axis = |axis| SignedAxis { axis, inverted: false };
    let geometry: Vec<Wheel> = wheels.iter().map(|wheel| wheel.geometry).collect();
    Plan {
        text: String::new(),
        name: "hay barrow".to_owned(),
        outline_m: [0.6, 0.8],
        layout: Layout::new(&geometry).unwrap(),
        wheels,
        links: vec![link("front", 2), link("rear", 3)],
        paces: vec![PacePlan { name: "creep".to_owned(), pace: Pace { travel_m_s: 0.25, turn_rad_s: 0.6 } }],
        limits: Limits {
            speed_up_m_s2: 1.0,
            slow_down_m_s2: 1.0,
            stop_m_s2: 1.5,
            turn_rad_s2: 3.0,
            grip_m_s2: 1.0,
            smoothing_s: 0.1,
            saturation: Saturation::Together,
        },
        pad: PadPlan {
            name: String::new(),
            id: String::new(),
            wired: false,
            forward: axis(PadAxis::LeftStickY),
            left: axis(PadAxis::LeftStickX),
            turn_left: axis(PadAxis::RightStickX),
            response: Response { deadband: 0.1, curve: 1.0 },
            hold: PadButton::RightTrigger2,
            hold_on: 0.6,
            hold_off: 0.4,
            hold_squeeze: None,
            ready: PadButton::Start,
            reset: PadButton::Select,
            stop: PadButton::East,
            pace_up: PadButton::DPadUp,
            pace_down: PadButton::DPadDown,
            frame: PadButton::North,
            zero_heading: PadButton::West,
        },
        room: RoomPlan { heading: HeadingSource::Wheels, lead_ms: 0.0 },
        guard: GuardPlan {
            stop_category: StopCategory::One,
            pad_quiet_stream_ms: 200.0,
            pad_quiet_change_ms: 2000.0,
            feedback_quiet_ms: 100.0,
            not_heard_ms: 100.0,
            late_ms: 50.0,
            driver_ms: None,
            follow_share: 0.1,
            follow_lag_s: 0.08,
            follow_s: 0.5,
            slowing_s: 0.2,
            runaway_share: 0.05,
            runaway_s: 0.3,
            runaway_rad: 0.1,
            skid_share: 0.1,
            skid_s: 1.0,
            standstill_share: 0.02,
            standstill_s: 0.1,
            stop_margin_s: 0.5,
            ready_idle_s: 60.0,
            reset_hold_s: 1.0,
        },
        bay: BayPlan { clear_m: None, coast_m_s2: None },
        tick: TickPlan { rate_hz: 200.0, realtime: 0, cpu: None, lock_memory: false },
        record: RecordPlan { dir: None, keep_gb: 1.0 },
        console: ConsolePlan { socket: None, reset: false },
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
