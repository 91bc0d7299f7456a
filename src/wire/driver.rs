//! The drivers' side of the line as a pure state machine: bytes and times in, speeds and bytes out.
//!
//! ```text
//!            park            hold            run
//!  Fresh ─────────> Parked ───────> Holding <────> Running
//!    ^                ^ └──── park ────┘ park ───────┘ │
//!    │ Clear          │                                │ Stop, silence, stop input
//!    └──────────── Latched <───────────────────────────┘   (from every state; silence only with torque)
//! ```
//! It never trusts the host: everything that is not expected is refused and counted, and a latch ends only by a Clear
//! that carries the present token, after the ramp, with the stop input closed. All arithmetic is in integers, so that
//! another implementation gives the same bytes for the same history.

use super::{
    ChannelState, Deframer, Drive, Feedback, FromDrivers, Identity, MAX_ON_LINE, Mode, PerChannel, ToDrivers,
    emit_from_drivers, parse_to_drivers, status,
};

/// Feedback is sent at least this often.
pub const FEEDBACK_EVERY_US: u64 = 20_000;

/// What the hardware says at this moment.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Measured {
    /// Angle and speed of each channel.
    pub channels: PerChannel<ChannelState>,
    /// Supply voltage.
    pub supply_mv: u16,
    /// Yaw rate in 1/2048 rad/s, where there is a sensor and it is sound.
    pub yaw_rate: Option<i16>,
    /// Fault bits of [`status::FAULTS`] that stand, and [`status::SCALED`].
    pub bits: u16,
    /// The stop input is open.
    pub stop_input_open: bool,
}

/// What the motors are to do.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Command {
    /// Torque on.
    pub torque: bool,
    /// Speed of each channel in counts; zero without torque.
    pub speeds: PerChannel<i16>,
}

/// A whole level, as a share in units of 2^-32.
const FULL: u64 = 1 << 32;

/// Where the drivers stand.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum State {
    /// Started or cleared; no park seen yet.
    Fresh,
    Parked,
    Holding,
    Running,
    /// Stopped, until cleared.
    Latched(Ramp),
}

/// A linear ramp to zero of all channels together.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
struct Ramp {
    from_us: u64,
    span_us: u64,
    /// Share of the speeds at the latch with which this ramp began, see [`FULL`].
    level: u64,
    /// Torque is on until the ramp is over; never when the latch came from park.
    torque: bool,
}

impl Ramp {
    fn remaining_us(&self, now_us: u64) -> u64 {
        self.span_us.saturating_sub(now_us.saturating_sub(self.from_us))
    }

    fn level(&self, now_us: u64) -> u64 {
        (self.level * self.remaining_us(now_us)).checked_div(self.span_us).unwrap_or(0)
    }
}

/// The state of the drivers of one link.
#[derive(Clone, Debug)]
pub struct Driver {
    identity: Identity,
    deframer: Deframer,
    state: State,
    /// Speeds of the last Run taken; what a ramp starts from.
    speeds: PerChannel<i16>,
    /// When the validity of the last hold or run ends, and the ramp that it then wants.
    valid_until_us: u64,
    ramp_ms: u16,
    /// Latch and order bits.
    bits: u16,
    token: u16,
    ack: u8,
    refused: u16,
    sequence: u8,
    stop_input_was_open: bool,
    owes_identity: bool,
    owes_feedback: bool,
    last_feedback_us: u64,
}

impl Driver {
    /// Just started: parked, nothing owed. `identity.boot` should be new at each start; tokens grow from it.
    #[must_use]
    pub fn new(identity: Identity, now_us: u64) -> Self {
        let zeros = (0..identity.channels).map(|_| 0).take(super::MAX_CHANNELS).collect();
        Self {
            token: identity.boot,
            identity,
            deframer: Deframer::new(),
            state: State::Fresh,
            speeds: zeros,
            valid_until_us: 0,
            ramp_ms: 0,
            bits: 0,
            ack: 0,
            refused: 0,
            sequence: 0,
            stop_input_was_open: false,
            owes_identity: false,
            owes_feedback: false,
            last_feedback_us: now_us,
        }
    }

    /// Takes one byte from the line, received at `now_us`.
    pub fn receive(&mut self, byte: u8, now_us: u64) {
        let parsed = match self.deframer.push(byte) {
            None => return,
            Some(Ok(plain)) => parse_to_drivers(plain),
            Some(Err(lost)) => Err(lost),
        };
        // What ran out before these bytes came has run out, even if nobody called `advance` in between.
        self.expire(now_us);
        let taken = match parsed {
            Ok((sequence, message)) => self.take(message, now_us).then_some(sequence),
            Err(_) => None,
        };
        match taken {
            Some(sequence) => self.ack = sequence,
            None => self.refused = self.refused.wrapping_add(1),
        }
    }

    /// Lets time pass: validity, stop input. Call it often, and before [`Self::command`].
    pub fn advance(&mut self, now_us: u64, measured: &Measured) {
        self.expire(now_us);
        if measured.stop_input_open && !self.stop_input_was_open {
            self.latch(now_us, self.ramp_ms);
        }
        self.stop_input_was_open = measured.stop_input_open;
    }

    /// What the motors are to do now.
    #[must_use]
    pub fn command(&self, now_us: u64) -> Command {
        let (torque, level) = match self.state {
            State::Fresh | State::Parked => (false, 0),
            State::Holding => (true, 0),
            State::Running => (true, FULL),
            State::Latched(ramp) => (ramp.torque && ramp.remaining_us(now_us) > 0, ramp.level(now_us)),
        };
        let level = if torque { level } else { 0 };
        Command { torque, speeds: self.speeds.iter().map(|&speed| shared(speed, level)).collect() }
    }

    /// The next frame to send, whole with its end mark: its length, 0 when nothing is due.
    pub fn transmit(&mut self, now_us: u64, measured: &Measured, out: &mut [u8; MAX_ON_LINE]) -> usize {
        let message = if self.owes_identity {
            self.owes_identity = false;
            FromDrivers::Identity(self.identity.clone())
        } else if self.owes_feedback || now_us.saturating_sub(self.last_feedback_us) >= FEEDBACK_EVERY_US {
            self.owes_feedback = false;
            self.last_feedback_us = now_us;
            FromDrivers::Feedback(self.feedback(now_us, measured))
        } else {
            return 0;
        };
        let len = emit_from_drivers(self.sequence, &message, out);
        self.sequence = self.sequence.wrapping_add(1);
        len
    }

    /// Latched at present.
    #[must_use]
    pub fn latched(&self) -> bool {
        matches!(self.state, State::Latched(_))
    }

    fn feedback(&self, now_us: u64, measured: &Measured) -> Feedback {
        let mut bits = self.bits | (measured.bits & (status::FAULTS | status::SCALED));
        for (set, bit) in [
            (self.latched(), status::LATCHED),
            (measured.stop_input_open, status::STOP_INPUT_OPEN),
            (measured.yaw_rate.is_some(), status::YAW_RATE_VALID),
            (self.command(now_us).torque, status::TORQUE_ON),
        ] {
            if set {
                bits |= bit;
            }
        }
        Feedback {
            ack: self.ack,
            status: bits,
            token: self.token,
            boot: self.identity.boot,
            // The clock of the format wraps; the cut is meant.
            clock_us: (now_us & u64::from(u32::MAX)) as u32,
            supply_mv: measured.supply_mv,
            yaw_rate: measured.yaw_rate.unwrap_or(0),
            refused: self.refused,
            channels: measured.channels.iter().copied().take(usize::from(self.identity.channels)).collect(),
        }
    }

    /// Does what a frame says; false when it is refused.
    fn take(&mut self, message: ToDrivers, now_us: u64) -> bool {
        match message {
            ToDrivers::Ask => {
                self.owes_identity = true;
                true
            }
            ToDrivers::Drive(drive) => self.drive(&drive, now_us),
            ToDrivers::Stop { ramp_ms } => {
                self.stop(ramp_ms, now_us);
                true
            }
            ToDrivers::Clear { token } => self.clear(token, now_us),
        }
    }

    fn drive(&mut self, drive: &Drive, now_us: u64) -> bool {
        let fits = drive.speeds.len() == usize::from(self.identity.channels)
            && drive.valid_ms <= self.identity.silence_ms;
        if !fits || self.latched() {
            return false;
        }
        let next = match (drive.mode, self.state) {
            (Mode::Park, _) => State::Parked,
            (Mode::Hold, State::Parked | State::Holding | State::Running) => State::Holding,
            (Mode::Run, State::Holding | State::Running) => State::Running,
            (Mode::Hold | Mode::Run, _) => {
                self.bits |= status::OUT_OF_ORDER;
                return false;
            }
        };
        if drive.mode == Mode::Park {
            self.bits &= !status::OUT_OF_ORDER;
        }
        self.state = next;
        self.speeds.clone_from(&drive.speeds);
        self.valid_until_us = now_us + u64::from(drive.valid_ms) * 1000;
        self.ramp_ms = drive.ramp_ms.min(self.identity.ramp_max_ms);
        self.owes_feedback = true;
        true
    }

    /// A Stop: latches, or shortens the ramp of a latch that stands.
    fn stop(&mut self, ramp_ms: u16, now_us: u64) {
        let ramp_ms = ramp_ms.min(self.identity.ramp_max_ms);
        let span_us = u64::from(ramp_ms) * 1000;
        match &mut self.state {
            State::Latched(ramp) => {
                if span_us < ramp.remaining_us(now_us) {
                    // From where it is now, so that the speed does not jump.
                    *ramp = Ramp { level: ramp.level(now_us), from_us: now_us, span_us, torque: ramp.torque };
                }
                self.draw_token();
            }
            State::Fresh | State::Parked | State::Holding | State::Running => self.latch(now_us, ramp_ms),
        }
    }

    fn clear(&mut self, token: u16, now_us: u64) -> bool {
        let State::Latched(ramp) = self.state else { return false };
        if token != self.token || ramp.remaining_us(now_us) > 0 || self.stop_input_was_open {
            return false;
        }
        self.state = State::Fresh;
        self.bits = 0;
        self.ramp_ms = 0;
        self.speeds.iter_mut().for_each(|speed| *speed = 0);
        true
    }

    /// Validity runs out, in hold and run only; the ramp starts in that instant.
    fn expire(&mut self, now_us: u64) {
        if matches!(self.state, State::Holding | State::Running) && now_us >= self.valid_until_us {
            self.bits |= status::WENT_SILENT;
            self.latch(self.valid_until_us, self.ramp_ms);
        }
    }

    fn latch(&mut self, at_us: u64, ramp_ms: u16) {
        let torque = match self.state {
            State::Latched(_) => return,
            State::Fresh | State::Parked => false,
            State::Holding | State::Running => true,
        };
        let span_us = if torque { u64::from(ramp_ms) * 1000 } else { 0 };
        self.state = State::Latched(Ramp { from_us: at_us, span_us, level: FULL, torque });
        self.draw_token();
    }

    /// A new token: a linear congruential step of full period (multiplier and increment of Knuth, TAOCP vol. 2,
    /// 3.2.1.2, theorem A: odd increment, multiplier 1 modulo 4), so that it never repeats soon.
    fn draw_token(&mut self) {
        self.token = self.token.wrapping_mul(25_173).wrapping_add(13_849);
    }
}

/// A speed by a share of [`FULL`], rounded to the nearest count, halves away from zero.
fn shared(speed: i16, level: u64) -> i16 {
    let size = (u64::from(speed.unsigned_abs()) * level + FULL / 2) >> 32;
    let size = i16::try_from(size).unwrap_or(i16::MAX);
    if speed < 0 { -size } else { size }
}
