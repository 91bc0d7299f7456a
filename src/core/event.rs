//! What happened in a tick, as facts; words for people are made from them outside the tick.

use arrayvec::ArrayString;
use serde::{Deserialize, Serialize};

use super::io::{Outputs, Phase};
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
    /// A link does not yet report that it is latched: the stop has not arrived.
    NotLatched {
        /// The link.
        link: u8,
    },
}

/// In what an Identity differs from the plan, with what it says instead.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum IdentityField {
    /// The format's version.
    Version(u8),
    /// The name.
    Name(ArrayString<24>),
    /// The number of channels.
    Channels(u8),
    /// Size of a count of speed, urad/s.
    SpeedLsb(u32),
    /// Size of a count of angle, urad.
    AngleLsb(u32),
    /// `silence_ms` below the plan's `valid_ms`.
    Silence(u16),
    /// `ramp_max_ms` below the longest ramp needed.
    RampMax(u16),
    /// The plan takes the heading from a gyro, the drivers have none.
    YawRate,
}

impl Event {
    /// A short word for records.
    #[must_use]
    pub const fn code(&self) -> &'static str {
        match self {
            Self::Phase { .. } => "phase",
            Self::Trip(_) => "trip",
            Self::Refused { .. } => "refused",
            Self::Pace { .. } => "pace",
            Self::Frame(_) => "frame",
            Self::HeadingZeroed => "heading-zeroed",
            Self::HeadingFromGyro(_) => "heading-source",
            Self::Skidding { .. } => "skidding",
            Self::Pushed { .. } => "pushed",
            Self::LinkAnswers { .. } => "link-answers",
            Self::LinkDiffers { .. } => "link-differs",
            Self::Pad { .. } => "pad",
            Self::Scaled { .. } => "scaled",
            Self::FramesRefused { .. } => "frames-refused",
            Self::LastCheckFired => "last-check",
            Self::StopLinePulled(_) => "stop-line",
            Self::SendSkipped { .. } => "send-skipped",
            Self::TicksMissed { .. } => "ticks-missed",
            Self::PadQuiet { .. } => "pad-quiet",
        }
    }

    /// Must never be crowded out of a tick by lesser events.
    const fn weighs(&self) -> bool {
        match self {
            Self::Phase { .. } | Self::Trip(_) | Self::Refused { .. } | Self::PadQuiet { .. } => true,
            Self::Pace { .. }
            | Self::Frame(_)
            | Self::HeadingZeroed
            | Self::HeadingFromGyro(_)
            | Self::Skidding { .. }
            | Self::Pushed { .. }
            | Self::LinkAnswers { .. }
            | Self::LinkDiffers { .. }
            | Self::Pad { .. }
            | Self::Scaled { .. }
            | Self::FramesRefused { .. }
            | Self::LastCheckFired
            | Self::StopLinePulled(_)
            | Self::SendSkipped { .. }
            | Self::TicksMissed { .. } => false,
        }
    }
}

/// Places of a tick's events that only a phase, a trip or a refusal may take.
const KEPT_FREE: usize = 4;

/// Tells an event. Lesser ones beyond what a tick can hold are dropped.
pub(super) fn say(out: &mut Outputs, event: Event) {
    if event.weighs() || out.events.remaining_capacity() > KEPT_FREE {
        let _ = out.events.try_push(event);
    }
}
