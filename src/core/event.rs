//! What happened in a tick, as facts; words for people are made from them outside the tick.

use serde::{Deserialize, Serialize};

use super::io::Phase;
use super::{Cause, io::Pull};
use crate::shaping::Frame;

/// One fact.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum Event {
    /// The phase changed.
    Phase {
        /// From.
        from: Phase,
        /// To.
        to: Phase,
    },
    /// A trip, or a further cause while tripped.
    Trip(Cause),
    /// A request was refused.
    Refused {
        /// What was asked.
        request: Request,
        /// Why not.
        wait: Wait,
    },
    /// Another pace.
    Pace {
        /// Index in the plan.
        pace: u8,
    },
    /// Another frame is in force.
    Frame(Frame),
    /// The present heading became zero.
    HeadingZeroed,
    /// The yaw rate went invalid or came back; `true`: the gyro is used.
    HeadingFromGyro(bool),
    /// The wheels skid, not yet long enough to trip.
    Skidding {
        /// The wheel, where five or more can tell.
        wheel: Option<u8>,
        /// The residual, rad/s.
        residual_rad_s: f32,
    },
    /// A wheel turns without torque: the base is pushed.
    Pushed {
        /// The wheel.
        wheel: u8,
    },
    /// A link answers as configured.
    LinkAnswers {
        /// The link.
        link: u8,
    },
    /// A link answers as something else.
    LinkDiffers {
        /// The link.
        link: u8,
        /// In what.
        field: IdentityField,
        /// What it says.
        found: Found,
    },
    /// Pad there, or not any more.
    Pad {
        /// It is there.
        present: bool,
    },
    /// A driver scaled the commanded speeds.
    Scaled {
        /// The link.
        link: u8,
    },
    /// A driver refused or dropped frames.
    FramesRefused {
        /// The link.
        link: u8,
        /// How many since the last such event.
        count: u16,
    },
    /// The last check of shaping fired: a bug, the twist was scaled.
    LastCheckFired,
    /// The stop line was pulled outside the tick.
    StopLinePulled(Pull),
    /// The tick skipped sending to a link because frames were still unsent.
    SendSkipped {
        /// The link.
        link: u8,
    },
    /// Ticks were missed.
    TicksMissed {
        /// How many.
        count: u32,
    },
    /// Pad silent: stopped as by a release.
    PadQuiet {
        /// For how long.
        quiet_ms: u32,
    },
}

/// What a person asked for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Request {
    /// Parked to Ready.
    Ready,
    /// Ready to Driving.
    Press,
    /// Tripped to Parked.
    Reset,
}

/// What a request waits for: the reason in one line.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum Wait {
    /// No pad.
    NoPad,
    /// The hold control is not released.
    HoldNotReleased,
    /// A stick is off-centre.
    SticksNotCentred,
    /// A link's port is not open.
    LinkNotOpen {
        /// The link.
        link: u8,
    },
    /// A link has not told what it is.
    NoIdentity {
        /// The link.
        link: u8,
    },
    /// A link says that it is something else than configured.
    IdentityDiffers {
        /// The link.
        link: u8,
        /// In what.
        field: IdentityField,
        /// What it says.
        found: Found,
    },
    /// No fresh feedback from a link.
    NoFeedback {
        /// The link.
        link: u8,
    },
    /// A link is latched.
    Latched {
        /// The link.
        link: u8,
    },
    /// A driver's fault stands.
    Fault {
        /// The link.
        link: u8,
        /// Its status bits.
        status: u16,
    },
    /// A driver's stop input is open.
    StopInputOpen {
        /// The link.
        link: u8,
    },
    /// The reset must come from the pad (stop asked there or at a driver's stop input).
    ResetAtPad,
    /// A press in Stopping or off-centre was spent: release and press again.
    PressSpent,
    /// The program is ending.
    Quitting,
    /// Not in this phase.
    WrongPhase,
    /// Wheels still turn.
    NotStanding,
    /// The stop button is down.
    StopDown,
}

/// What an Identity says where it differs.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Found {
    /// A number.
    Number(u32),
    /// A name.
    Name(arrayvec::ArrayString<24>),
}

/// In what an Identity differs from the plan.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum IdentityField {
    /// The format's version.
    Version,
    /// The name.
    Name,
    /// The number of channels.
    Channels,
    /// Size of a count of speed.
    SpeedLsb,
    /// Size of a count of angle.
    AngleLsb,
    /// `silence_ms` below the plan's `valid_ms`.
    Silence,
    /// `ramp_max_ms` below the longest ramp needed.
    RampMax,
    /// The plan takes the heading from a gyro, the drivers have none.
    YawRate,
}
