//! The drivers of one link: [`Driver`] with its line, its sensors and the dead time before its motors react.

use std::collections::VecDeque;

use arrayvec::ArrayString;

use super::chance::Chance;
use super::fault::LinkFault;
use super::noise::Way;
use super::sim::SimSettings;
use crate::config::{LinkPlan, WheelPlan};
use crate::units::{Mono, s_to_ns};
use crate::wire::driver::{Command, Driver, Measured};
use crate::wire::{ChannelState, Identity, MAX_ON_LINE, YAW_COUNTS_PER_RAD_S, flag, status};

/// How far the supply sags for each wheel at its greatest speed; a battery of middling size, common practice.
const SAG_V: f64 = 0.15;

/// How a wheel hangs on its channel.
#[derive(Clone, Debug)]
pub(super) struct Mount {
    pub(super) link: usize,
    channel: usize,
    /// rad/s of the wheel in one count of commanded speed; negative where the channel is reversed.
    rad_s_per_count: f64,
    /// rad of the wheel in one count of angle; the same sign.
    rad_per_count: f64,
}

impl Mount {
    pub(super) fn of(wheel: &WheelPlan, link: Option<&LinkPlan>) -> Self {
        let sign = if wheel.reversed { -1.0 } else { 1.0 };
        let count = |urad: Option<u32>| sign * 1e-6 * f64::from(urad.unwrap_or(1)) / wheel.gear;
        Self {
            link: wheel.link,
            channel: usize::from(wheel.channel),
            rad_s_per_count: count(link.map(|link| link.speed_lsb_urad_s)),
            rad_per_count: count(link.map(|link| link.angle_lsb_urad)),
        }
    }

    /// The speed that its driver makes for, rad/s at the wheel.
    pub(super) fn target_rad_s(&self, board: &Board) -> f64 {
        board.acting.speeds.get(self.channel).map_or(0.0, |counts| f64::from(*counts) * self.rad_s_per_count)
    }
}

#[derive(Clone, Debug)]
pub(super) struct Board {
    identity: Identity,
    driver: Driver,
    /// When it started.
    origin: Mono,
    /// To the drivers, and from them.
    hears: Way,
    says: Way,
    chance: Chance,
    measured: Measured,
    /// What the motors are to do, from when on; and what they do now.
    coming: VecDeque<(Mono, Command)>,
    acting: Command,
    latch_itself: bool,
    blocked: bool,
    stop_input_open: bool,
    fault_bits: u16,
    scaled: bool,
    yaw_valid: bool,
    supply_v: f64,
    full_supply_v: f64,
    load: f64,
}

impl Board {
    pub(super) fn new(link: &LinkPlan, index: u64, seed: u64, settings: &SimSettings) -> Self {
        let chance = |purpose: u64| Chance::new(seed, 8 * index + purpose);
        let mut own = chance(0);
        let mut name = ArrayString::new();
        for letter in link.expect.chars() {
            // A longer name than fits is cut, as a driver's own would be; the configuration refuses it before.
            if name.try_push(letter).is_err() {
                break;
            }
        }
        let identity = Identity {
            version: 1,
            flags: flag::SIMULATED | flag::YAW_RATE | flag::STOP_INPUT,
            channels: link.channels,
            speed_lsb_urad_s: link.speed_lsb_urad_s,
            angle_lsb_urad: link.angle_lsb_urad,
            silence_ms: settings.silence_ms.max(link.valid_ms),
            ramp_max_ms: settings.ramp_max_ms,
            boot: own.bits16(),
            name,
        };
        let driver = Driver::new(identity.clone(), 0);
        let channels = (0..link.channels).map(|_| ChannelState::default());
        let measured = Measured { channels: channels.collect(), ..Measured::default() };
        Self {
            acting: driver.command(0),
            driver,
            identity,
            origin: Mono::default(),
            hears: Way::new(chance(1)),
            says: Way::new(chance(2)),
            chance: own,
            measured,
            coming: VecDeque::new(),
            latch_itself: false,
            blocked: false,
            stop_input_open: false,
            fault_bits: 0,
            scaled: false,
            yaw_valid: true,
            supply_v: settings.supply_v,
            full_supply_v: settings.supply_v,
            load: 0.0,
        }
    }

    /// The clock begins to run: the drivers start now.
    pub(super) fn begin(&mut self, now: Mono) {
        self.origin = now;
    }

    /// Takes bytes from the line.
    pub(super) fn hear(&mut self, bytes: &[u8], now: Mono) {
        self.hears.put(bytes, now);
        self.listen(now);
    }

    /// Lets time pass for the drivers.
    pub(super) fn tick(&mut self, now: Mono) {
        self.show();
        let now_us = self.us(now);
        if self.latch_itself {
            // A stop input that opens and closes at once latches and leaves no other trace.
            self.latch_itself = false;
            let blink = Measured { stop_input_open: true, ..self.measured.clone() };
            self.driver.advance(now_us, &blink);
        }
        self.driver.advance(now_us, &self.measured);
        self.answer(now);
        self.listen(now);
        self.coming.push_back((now, self.driver.command(now_us)));
    }

    /// Lets the motors take over what the drivers wanted `dead_time_s` ago.
    pub(super) fn act(&mut self, now: Mono, dead_time_s: f64) {
        let dead_ns = s_to_ns(dead_time_s);
        while self.coming.front().is_some_and(|(at, _)| at.plus_ns(dead_ns) <= now) {
            if let Some((_, command)) = self.coming.pop_front() {
                self.acting = command;
            }
        }
    }

    /// Appends what has come out of the line.
    pub(super) fn say(&mut self, now: Mono, out: &mut Vec<u8>) {
        self.says.take(now, out);
    }

    /// Whether its end of the line takes nothing any more.
    pub(super) fn blocked(&self) -> bool {
        self.blocked
    }

    /// Whether its motors have torque.
    pub(super) fn torque(&self) -> bool {
        self.acting.torque
    }

    /// The supply under its present load.
    pub(super) fn supply_v(&self) -> f64 {
        (self.supply_v - SAG_V * self.load).max(0.0)
    }

    /// Whether the supply does not give what is commanded.
    pub(super) fn set_scaled(&mut self, scaled: bool) {
        self.scaled = scaled;
    }

    /// Takes the sum of its wheels' speeds, each as a share of the greatest.
    pub(super) fn read_load(&mut self, load: f64) {
        self.load = load;
        self.measured.supply_mv = libm::round(self.supply_v() * 1000.0) as u16;
    }

    /// Takes a reading of its yaw gyro.
    pub(super) fn read_gyro(&mut self, turn_rad_s: f64, settings: &SimSettings) {
        let noise = match settings.gyro_noise_rad_s {
            0.0 => 0.0,
            spread => spread * self.chance.normal(),
        };
        let reading = (turn_rad_s + settings.gyro_bias_rad_s + noise) * YAW_COUNTS_PER_RAD_S;
        // A cast from float to integer takes what is out of range to the nearest end: so does a gyro.
        self.measured.yaw_rate = self.yaw_valid.then_some(libm::round(reading) as i16);
    }

    /// Takes a reading of a wheel's encoder: the angle since the drivers started, and the speed.
    pub(super) fn read_encoder(&mut self, mount: &Mount, angle_rad: f64, speed_rad_s: f64) {
        if let Some(channel) = self.measured.channels.get_mut(mount.channel) {
            // Through i64, so that an angle beyond the range of the format wraps as the format wants.
            channel.angle = libm::round(angle_rad / mount.rad_per_count) as i64 as i32;
            channel.speed = libm::round(speed_rad_s / mount.rad_s_per_count) as i16;
        }
    }

    pub(super) fn fault(&mut self, fault: LinkFault, now: Mono) {
        match fault {
            LinkFault::Mute => self.says.cut = true,
            LinkFault::Deaf => self.hears.cut = true,
            LinkFault::Cut => (self.says.cut, self.hears.cut) = (true, true),
            LinkFault::Blocked => self.blocked = true,
            LinkFault::Sound => {
                self.blocked = false;
                for way in [&mut self.says, &mut self.hears] {
                    way.cut = false;
                    way.set_lossy(0.0);
                    way.set_noisy(0.0);
                    way.set_late(0);
                }
            }
            LinkFault::Lossy(probability) => {
                for way in [&mut self.says, &mut self.hears] {
                    way.set_lossy(probability);
                }
            }
            LinkFault::Noisy(probability) => {
                for way in [&mut self.says, &mut self.hears] {
                    way.set_noisy(probability);
                }
            }
            LinkFault::Slow { late_ms } => self.says.set_late(s_to_ns(late_ms * 1e-3)),
            LinkFault::Restart => self.restart(now),
            LinkFault::Latch => self.latch_itself = true,
            LinkFault::StopInput { open } => self.stop_input_open = open,
            LinkFault::Bits(bits) => self.fault_bits = bits & status::FAULTS,
            LinkFault::Yaw { valid } => self.yaw_valid = valid,
            LinkFault::Supply { volts } => self.supply_v = volts,
        }
    }

    /// Undoes every fault that is not a thing of the past.
    pub(super) fn put_right(&mut self, now: Mono) {
        self.fault(LinkFault::Sound, now);
        self.fault(LinkFault::StopInput { open: false }, now);
        self.fault(LinkFault::Bits(0), now);
        self.fault(LinkFault::Yaw { valid: true }, now);
        self.supply_v = self.full_supply_v;
    }

    fn restart(&mut self, now: Mono) {
        self.identity.boot = self.identity.boot.wrapping_add(1);
        self.driver = Driver::new(self.identity.clone(), 0);
        self.origin = now;
        self.coming.clear();
        self.acting = self.driver.command(0);
    }

    /// Microseconds since the drivers started.
    fn us(&self, now: Mono) -> u64 {
        now.since_ns(self.origin) / 1000
    }

    fn show(&mut self) {
        self.measured.stop_input_open = self.stop_input_open;
        self.measured.bits = self.fault_bits | if self.scaled { status::SCALED } else { 0 };
        if !self.yaw_valid {
            self.measured.yaw_rate = None;
        }
    }

    /// Hands the drivers what has come through to them; they answer each frame by itself.
    fn listen(&mut self, now: Mono) {
        let mut heard = Vec::new();
        self.hears.take(now, &mut heard);
        let now_us = self.us(now);
        for byte in heard {
            self.driver.receive(byte, now_us);
            self.answer(now);
        }
    }

    fn answer(&mut self, now: Mono) {
        let now_us = self.us(now);
        let mut frame = [0; MAX_ON_LINE];
        loop {
            let length = self.driver.transmit(now_us, &self.measured, &mut frame);
            if length == 0 {
                return;
            }
            self.says.put(frame.get(..length).unwrap_or_default(), now);
        }
    }
}
