//! What a stick's deflection means.

use super::{Pace, Response, Sticks};
use crate::base::Twist;

/// The sticks after deadband and curve, each part still -1 to 1: the travel stick round (its length counts, never its
/// single axes), scaled so that motion starts from zero at the edge of the deadband. A value that is no number is 0.
#[must_use]
pub fn stick_response(sticks: Sticks, response: &Response) -> Sticks {
    let (x, y, turn) = (finite(sticks.x), finite(sticks.y), finite(sticks.turn));
    let length = libm::hypot(x, y);
    let travel = if length > 0.0 { curved(length, response) / length } else { 0.0 };
    let turned = curved(turn.abs(), response);
    Sticks { x: x * travel, y: y * travel, turn: if turn < 0.0 { -turned } else { turned } }
}

/// The sticks are let go: both inside their deadbands. Values that are no numbers are not.
#[must_use]
pub fn centred(sticks: Sticks, response: &Response) -> bool {
    libm::hypot(sticks.x, sticks.y) <= response.deadband && sticks.turn.abs() <= response.deadband
}

/// Step 1 of shaping: what the sticks ask for at a pace.
pub(super) fn asked(sticks: Sticks, response: &Response, pace: Pace) -> Twist {
    let meant = stick_response(sticks, response);
    Twist::new(meant.turn * pace.turn_rad_s, meant.x * pace.travel_m_s, meant.y * pace.travel_m_s)
}

/// A deflection from 0 on, after deadband and curve, 0 to 1.
fn curved(deflection: f64, response: &Response) -> f64 {
    let beyond = (deflection - response.deadband) / (1.0 - response.deadband);
    libm::pow(beyond.clamp(0.0, 1.0), response.curve)
}

fn finite(value: f64) -> f64 {
    if value.is_finite() { value.clamp(-1.0, 1.0) } else { 0.0 }
}
