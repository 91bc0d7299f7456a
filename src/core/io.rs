//! What a step sees and what it decides. Everything: a step knows nothing else, so a recorded run can be played again.

use arrayvec::ArrayVec;
use serde::{Deserialize, Serialize};

use super::{Cause, Event, MAX_LINKS};
use crate::base::{PerWheel, Pose, Twist};
use crate::config::{PadButton, PadPlan};
use crate::shaping::{Frame, Sticks};
use crate::units::Mono;
use crate::wire::{Feedback, Identity, ToDrivers};

/// Everything that one step sees.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Inputs {
    /// When the tick woke.
    pub now: Mono,
    /// When it should have woken: on a fixed grid, one period apart. A tick that was missed is skipped, not caught up.
    pub due: Mono,
    /// The gamepad, or the scripted hands in its place.
    pub pad: PadInput,
    /// One entry a link, in the order of the plan.
    pub links: ArrayVec<LinkInput, MAX_LINKS>,
    /// What the console asked since the last tick.
    pub console: ConsoleInput,
    /// An orderly end was asked (a signal, the service manager). Stays true once set.
    pub quit: bool,
    /// The stop line stands pulled: by whom, and the number of that pull. `None` when it rests.
    pub stop_line: Option<Pull>,
}

/// A pull of the stop line.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Pull {
    /// Counts the pulls; the release names the pull it answers, so that a later pull is never lost.
    pub number: u32,
    /// Who pulled.
    pub by: Puller,
}

/// Who pulled the stop line.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Puller {
    /// The core itself, through `Outputs::pull_stop`.
    Core,
    /// The pad thread, at the stop button.
    PadStop,
    /// The pad thread: the device went away.
    PadGone,
    /// The console.
    Console,
    /// The sentinel: no tick in time.
    Sentinel,
    /// The panic hook.
    Panic,
    /// A second signal.
    SecondSignal,
    /// A link's thread: the port went away.
    LinkGone,
}

impl Puller {
    /// All of them.
    pub const ALL: [Self; 8] = [
        Self::Core,
        Self::PadStop,
        Self::PadGone,
        Self::Console,
        Self::Sentinel,
        Self::Panic,
        Self::SecondSignal,
        Self::LinkGone,
    ];
}

/// The pad as it is now, and what happened on it since the last tick.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct PadInput {
    /// A pad is there and its device answers. When false all else is at rest.
    pub present: bool,
    /// Its raw reports keep coming while it is still (so silence tells that it is gone).
    pub streams: bool,
    /// When it last gave a sign of life: an event, or a raw report.
    pub last_sign: Mono,
    /// The sticks, after mapping, before deadband and curve.
    pub sticks: Sticks,
    /// The hold control now, 0 released to 1 pressed home.
    pub hold: f64,
    /// The least it was since the last tick: a release between two ticks is not lost.
    pub hold_least: f64,
    /// Buttons that are down now.
    pub down: Buttons,
    /// Buttons that went down since the last tick, even if they came up again.
    pub pressed: Buttons,
}

/// A set of buttons, by their meaning.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Buttons(pub u8);

impl Buttons {
    /// A button that has a value goes down from here on, and comes up again below [`Self::UP_BELOW`]: gilrs' own
    /// thresholds, which it applies to every button.
    pub const DOWN_FROM: f64 = 0.75;
    /// See [`Self::DOWN_FROM`].
    pub const UP_BELOW: f64 = 0.65;

    /// Which button of a pad means what; the hold control is none of them.
    #[must_use]
    pub const fn meanings(plan: &PadPlan) -> [(PadButton, Self); 7] {
        [
            (plan.ready, Self::READY),
            (plan.reset, Self::RESET),
            (plan.stop, Self::STOP),
            (plan.pace_up, Self::PACE_UP),
            (plan.pace_down, Self::PACE_DOWN),
            (plan.frame, Self::FRAME),
            (plan.zero_heading, Self::ZERO_HEADING),
        ]
    }

    /// Asks for Ready.
    pub const READY: Self = Self(1 << 0);
    /// Asks to end Tripped; must be held.
    pub const RESET: Self = Self(1 << 1);
    /// Stop.
    pub const STOP: Self = Self(1 << 2);
    /// The next faster pace.
    pub const PACE_UP: Self = Self(1 << 3);
    /// The next slower pace.
    pub const PACE_DOWN: Self = Self(1 << 4);
    /// Base frame or room frame.
    pub const FRAME: Self = Self(1 << 5);
    /// The present heading becomes zero.
    pub const ZERO_HEADING: Self = Self(1 << 6);

    /// Whether any of `other` is in the set.
    #[must_use]
    pub const fn has(self, other: Self) -> bool {
        self.0 & other.0 != 0
    }

    /// Both sets together.
    #[must_use]
    pub const fn with(self, other: Self) -> Self {
        Self(self.0 | other.0)
    }

    /// This set without `other`.
    #[must_use]
    pub const fn without(self, other: Self) -> Self {
        Self(self.0 & !other.0)
    }
}

/// What one link heard and suffered since the last tick.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct LinkInput {
    /// The port is open.
    pub open: bool,
    /// Counts the openings of the port; a change means a new port (and perhaps a new driver behind it).
    pub openings: u32,
    /// The latest Identity heard since the last tick.
    pub identity: Option<Identity>,
    /// The latest Feedback heard since the last tick.
    pub feedback: Option<Heard>,
    /// Status bits of every Feedback since the last tick, or-ed: a bit that came and went is not lost.
    pub status_seen: u16,
    /// Frames from the drivers that failed length, kind or check, since the start.
    pub dropped: u32,
    /// Frames still in the kernel's queue, rounded up; `None` where the kernel does not count (pseudo-terminals).
    pub unsent: Option<u16>,
    /// The frame given at the last tick could not be written in full.
    pub write_blocked: bool,
}

/// A Feedback and when it came.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Heard {
    /// When its last byte was read.
    pub at: Mono,
    /// What it said.
    pub feedback: Feedback,
}

/// What the console asked since the last tick.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct ConsoleInput {
    /// Stop.
    pub stop: bool,
    /// Reset, said to be in sight of the base. The shell passes it on only where `[console] reset = true`.
    pub reset: bool,
}

/// Where the program stands. The names are final: they appear in records, on the console and in the CSV files.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash, Serialize, Deserialize)]
pub enum Phase {
    /// No torque.
    #[default]
    Parked,
    /// Zero speed with torque.
    Ready,
    /// Following the sticks, held by a person.
    Driving,
    /// Shrinking to zero.
    Stopping,
    /// Stopped and latched.
    Tripped,
}

/// Everything that one step decides.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Outputs {
    /// The phase after this tick.
    pub phase: Phase,
    /// Why it is Tripped; `None` in every other phase.
    pub cause: Option<Cause>,
    /// What to send, in order; at most one Drive or Stop a link, and beside it an Ask or Clear.
    pub frames: ArrayVec<Outgoing, { 2 * MAX_LINKS }>,
    /// Pull the stop line now (again every tick while a link is not yet known to be latched).
    pub pull_stop: bool,
    /// The ramp that a stop pulled before the next tick must carry.
    pub stop_ramp_ms: u16,
    /// The sequence that such a stop must carry, one a link.
    pub stop_sequence: ArrayVec<u8, MAX_LINKS>,
    /// Let the stop line rest again: the pull of this number has been answered by a reset.
    pub release_stop_line: Option<u32>,
    /// What happened.
    pub events: ArrayVec<Event, 16>,
    /// The orderly end is done: parked and told so. The shell may leave.
    pub finished: bool,
    /// The figures behind it, for people and records.
    pub view: View,
}

/// A frame for one link.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Outgoing {
    /// Index of the link in the plan.
    pub link: u8,
    /// Its sequence.
    pub sequence: u8,
    /// What it says.
    pub message: ToDrivers,
}

/// Figures of one tick, for the status line, the console and the record.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct View {
    /// The frame that the sticks mean.
    pub frame: Frame,
    /// Index of the pace in the plan.
    pub pace: u8,
    /// What the sticks ask for, in the stick frame.
    pub demand: Twist,
    /// What is sent, in the base frame, before rounding.
    pub sent: Twist,
    /// Where odometry believes the base is.
    pub pose: Pose,
    /// Sent wheel speeds after rounding to counts, rad/s at the wheel.
    pub sent_rad_s: PerWheel<f64>,
    /// The same in counts of the driver.
    pub sent_counts: PerWheel<i16>,
    /// Measured wheel speeds, rad/s at the wheel.
    pub measured_rad_s: PerWheel<f64>,
    /// Greatest skid residual of a wheel, rad/s; 0 with three wheels.
    pub skid_rad_s: f64,
    /// Why Ready or a reset is refused at present, `None` when it would be taken.
    pub waits_for: Option<super::event::Wait>,
    /// Age of the newest Feedback a link, seconds; infinite before the first.
    pub feedback_age_s: ArrayVec<f32, MAX_LINKS>,
    /// Round trip of the last acknowledged frame a link, seconds.
    pub round_trip_s: ArrayVec<f32, MAX_LINKS>,
}
