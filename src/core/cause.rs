//! Why the base was stopped, with the values that decided it.

use serde::{Deserialize, Serialize};

use crate::config::StopCategory;

/// Why the phase is Tripped.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum Cause {
    /// Somebody or something asked for a stop.
    StopAsked(StopBy),
    /// The pad was unplugged or its device does not answer.
    PadGone,
    /// No valid feedback from a link.
    FeedbackQuiet {
        /// The link.
        link: u8,
        /// Age of the newest.
        age_ms: u32,
    },
    /// What is sent is not acknowledged in time.
    NotHeard {
        /// The link.
        link: u8,
        /// Age of the last acknowledged frame.
        age_ms: u32,
    },
    /// A port is gone or cannot be written.
    WriteFailed {
        /// The link.
        link: u8,
        /// The port is gone, not merely blocked.
        gone: bool,
    },
    /// A tick came too late.
    LateTick {
        /// By how much.
        late_ms: u32,
    },
    /// The sentinel saw no tick in time.
    NoTick,
    /// A driver reports something that must stop the base.
    DriverSays {
        /// The link.
        link: u8,
        /// What.
        what: DriverTrouble,
    },
    /// A wheel does not follow its command.
    NotFollowing {
        /// The wheel.
        wheel: u8,
        /// Command that it should follow, rad/s.
        commanded_rad_s: f32,
        /// What was measured, rad/s.
        measured_rad_s: f32,
    },
    /// A wheel does not slow down in a stop.
    NotSlowing {
        /// The wheel.
        wheel: u8,
        /// What the ramp should have made of it, rad/s.
        commanded_rad_s: f32,
        /// What was measured, rad/s.
        measured_rad_s: f32,
    },
    /// A wheel turns under torque although told to stand.
    Runaway {
        /// The wheel.
        wheel: u8,
        /// What was measured, rad/s.
        measured_rad_s: f32,
    },
    /// The wheels skid against each other.
    Skid {
        /// The wheel, where five or more can tell; `None` with four.
        wheel: Option<u8>,
        /// The residual, rad/s.
        residual_rad_s: f32,
    },
    /// A stop by the host did not reach standstill in time.
    StopOverdue {
        /// How long it had.
        allowed_ms: u32,
    },
    /// A second signal while stopping.
    SecondSignal,
    /// A thread of the program panicked.
    Panic,
    /// A driver was latched, or had torque on, when the program started or a port was opened.
    FoundLatched {
        /// The link.
        link: u8,
        /// Its status bits.
        status: u16,
    },
    /// A reset was tried and a link did not unlatch in time.
    NotCleared {
        /// The link.
        link: u8,
    },
}

impl Cause {
    /// A short word for records and tables.
    #[must_use]
    pub const fn code(&self) -> &'static str {
        match self {
            Self::StopAsked(StopBy::PadButton) => "stop-pad",
            Self::StopAsked(StopBy::Squeeze) => "stop-squeeze",
            Self::StopAsked(StopBy::Console) => "stop-console",
            Self::StopAsked(StopBy::DriverInput { .. }) => "stop-input",
            Self::PadGone => "pad-gone",
            Self::FeedbackQuiet { .. } => "feedback-quiet",
            Self::NotHeard { .. } => "not-heard",
            Self::WriteFailed { .. } => "write-fails",
            Self::LateTick { .. } => "late-tick",
            Self::NoTick => "no-tick",
            Self::DriverSays { .. } => "driver-says",
            Self::NotFollowing { .. } => "not-following",
            Self::NotSlowing { .. } => "not-slowing",
            Self::Runaway { .. } => "runaway",
            Self::Skid { .. } => "skid",
            Self::StopOverdue { .. } => "stop-overdue",
            Self::SecondSignal => "second-signal",
            Self::Panic => "panic",
            Self::FoundLatched { .. } => "found-latched",
            Self::NotCleared { .. } => "not-cleared",
        }
    }

    /// The stop category of IEC 60204-1 that it makes: 0 takes the torque off at once, 1 ramps first. `asked` is the
    /// category configured for stops that a person asks.
    #[must_use]
    pub const fn category(&self, asked: StopCategory) -> StopCategory {
        match self {
            Self::Runaway { .. } | Self::NotSlowing { .. } => StopCategory::Zero,
            Self::StopAsked(_) => asked,
            Self::PadGone
            | Self::FeedbackQuiet { .. }
            | Self::NotHeard { .. }
            | Self::WriteFailed { .. }
            | Self::LateTick { .. }
            | Self::NoTick
            | Self::DriverSays { .. }
            | Self::NotFollowing { .. }
            | Self::Skid { .. }
            | Self::StopOverdue { .. }
            | Self::SecondSignal
            | Self::Panic
            | Self::FoundLatched { .. }
            | Self::NotCleared { .. } => StopCategory::One,
        }
    }

    /// A stop asked by a person at the pad or at a driver's stop input: only the pad may reset it.
    #[must_use]
    pub const fn wants_reset_at_pad(&self) -> bool {
        match self {
            Self::StopAsked(by) => match by {
                StopBy::PadButton | StopBy::Squeeze | StopBy::DriverInput { .. } => true,
                StopBy::Console => false,
            },
            Self::PadGone
            | Self::FeedbackQuiet { .. }
            | Self::NotHeard { .. }
            | Self::WriteFailed { .. }
            | Self::LateTick { .. }
            | Self::NoTick
            | Self::DriverSays { .. }
            | Self::NotFollowing { .. }
            | Self::NotSlowing { .. }
            | Self::Runaway { .. }
            | Self::Skid { .. }
            | Self::StopOverdue { .. }
            | Self::SecondSignal
            | Self::Panic
            | Self::FoundLatched { .. }
            | Self::NotCleared { .. } => false,
        }
    }
}

/// Who asked for the stop.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum StopBy {
    /// The stop button.
    PadButton,
    /// The hold control squeezed through.
    Squeeze,
    /// The console.
    Console,
    /// A driver's stop input.
    DriverInput {
        /// The link.
        link: u8,
    },
}

/// What a driver reports.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum DriverTrouble {
    /// Fault bits, see [`crate::wire::status`].
    Fault {
        /// The bits.
        status: u16,
    },
    /// Latched although we sent no stop.
    LatchNotOurs {
        /// The bits.
        status: u16,
    },
    /// It started anew: another boot number, or its clock fell.
    Restarted,
    /// Its Identity is not the one that it had.
    IdentityChanged,
}
