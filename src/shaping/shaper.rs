//! One tick of shaping.

use super::{Frame, Limits, Pace, Response, Sticks};
use crate::base::{Layout, PerWheel, Twist};

/// What the shaper works with, fixed after start.
#[derive(Clone, Debug)]
pub struct ShaperSettings {
    /// Full-rank layout.
    pub layout: Layout,
    /// Greatest speed of each wheel, rad/s.
    pub max_rad_s: PerWheel<f64>,
    /// Greatest acceleration of each wheel, rad/s^2.
    pub max_rad_s2: PerWheel<f64>,
    /// `[limits]`.
    pub limits: Limits,
    /// Deadband and curve.
    pub response: Response,
    /// Length of a tick.
    pub period_s: f64,
    /// Delay between deciding and moving, for predicting the heading in the room frame.
    pub lead_s: f64,
}

/// What the motion is to become.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Goal {
    /// Follow the sticks at a pace.
    Follow {
        /// As the person holds them.
        sticks: Sticks,
        /// What a full stick means.
        pace: Pace,
    },
    /// Come to rest with `stop_m_s2`, travel and turn by one factor.
    Stop,
}

/// What one tick of shaping gives.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Shaped {
    /// What the sticks ask for after steps 1 to 3, in the stick frame.
    pub demand: Twist,
    /// The twist after smoothing, in the stick frame.
    pub in_stick_frame: Twist,
    /// The twist to send, in the base frame, before rounding to counts.
    pub in_base_frame: Twist,
    /// The last check had to scale: a bug in the steps before it, never expected.
    pub last_check_fired: bool,
}

/// The state of shaping: present velocity, moving average, frame.
#[derive(Clone, Debug)]
pub struct Shaper {
    settings: ShaperSettings,
    frame: Frame,
}

impl Shaper {
    /// At rest, in the base frame.
    #[must_use]
    pub fn new(settings: ShaperSettings) -> Self {
        Self { settings, frame: Frame::Base }
    }

    /// One tick. `heading_rad` is the base's present heading in the room.
    pub fn step(&mut self, _goal: Goal, _heading_rad: f64) -> Shaped {
        let _ = &self.settings;
        Shaped::default()
    }

    /// The frame in force now.
    #[must_use]
    pub fn frame(&self) -> Frame {
        self.frame
    }

    /// Asks for another frame; taken over without a step in velocity, when the twist is inside both frames' sets.
    pub fn request_frame(&mut self, _frame: Frame) {}

    /// The heading's zero or source changed: the heading passed to `step` will from now on be larger by `by_rad` for
    /// the same attitude. Rotates the present state so that the base's motion is unchanged.
    pub fn shift_heading(&mut self, _by_rad: f64) {}

    /// Forgets all motion: the base is known to stand (Parked, Ready, Tripped).
    pub fn rest(&mut self) {}

    /// Nothing left to send: velocity and every sample of the average are zero.
    #[must_use]
    pub fn at_rest(&self) -> bool {
        true
    }
}
