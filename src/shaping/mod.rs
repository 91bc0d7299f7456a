//! From sticks to a twist that the base can make: response, grip, saturation, rate, smoothing, exact room-frame
//! steps. One call a tick; knows nothing of phases or frames on a line.

pub mod average;
pub mod region;
pub mod shaper;
pub mod stick;

pub use average::MAX_SAMPLES;
pub use shaper::{Goal, Shaped, Shaper, ShaperSettings, ShaperState, demand};
pub use stick::{centred, stick_response};

use serde::{Deserialize, Serialize};

/// The frame that the sticks mean.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub enum Frame {
    /// Forward is where the base points.
    #[default]
    Base,
    /// Forward is the room's x, whatever the heading.
    Room,
}

/// What gives way when the sticks ask for more than the wheels can turn.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub enum Saturation {
    /// All of the twist by one factor.
    #[default]
    Together,
    /// Travel gives way first, turn is kept as far as it can be.
    KeepTurn,
    /// Turn gives way first, travel is kept as far as it can be.
    KeepTravel,
}

/// Limits of motion, those of `[limits]`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Limits {
    /// Greatest acceleration along the velocity while speeding up.
    pub speed_up_m_s2: f64,
    /// Greatest deceleration while following the sticks.
    pub slow_down_m_s2: f64,
    /// Deceleration of a stop, by the host or by the drivers.
    pub stop_m_s2: f64,
    /// Greatest turn acceleration, also of a stop.
    pub turn_rad_s2: f64,
    /// Greatest centripetal acceleration |v||omega| that the floor gives.
    pub grip_m_s2: f64,
    /// Length of the moving average.
    pub smoothing_s: f64,
    /// What gives way.
    pub saturation: Saturation,
}

/// One speed step: what a full stick means.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Pace {
    /// Travel speed at full stick.
    pub travel_m_s: f64,
    /// Turn rate at full stick.
    pub turn_rad_s: f64,
}

/// The sticks as the person holds them, each -1 to 1, before deadband and curve: x forward, y left, turn left.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Sticks {
    /// Travel stick, forward positive.
    pub x: f64,
    /// Travel stick, left positive.
    pub y: f64,
    /// Turn stick, left (anticlockwise) positive.
    pub turn: f64,
}

/// How a stick's deflection becomes a share of the pace.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Response {
    /// Deflection below which nothing is meant, round for the travel stick; 0 to 0.5.
    pub deadband: f64,
    /// Exponent of the response curve: 1 straight, 2 gentle round the centre.
    pub curve: f64,
}
