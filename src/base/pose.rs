//! Planar rigid motions, SE(2): exponential, logarithm, composition (E. Eade, notes on Lie groups; series near zero).

use super::{Pose, Twist};

/// Below this angle the series are exact to the last digit.
const SMALL_RAD: f64 = 1e-3;

/// The displacement, seen from the start, that a constant body twist makes in `dt_s`.
#[must_use]
pub fn exp(twist: Twist, dt_s: f64) -> Pose {
    let angle = twist.turn_rad_s * dt_s;
    let (x, y) = (twist.x_m_s * dt_s, twist.y_m_s * dt_s);
    let (along, across) = if angle.abs() < SMALL_RAD {
        let square = angle * angle;
        (
            1.0 - square / 6.0 * (1.0 - square / 20.0),
            angle / 2.0 * (1.0 - square / 12.0 * (1.0 - square / 30.0)),
        )
    } else {
        // 1 - cos written so that it does not cancel.
        let half = libm::sin(angle / 2.0);
        (libm::sin(angle) / angle, 2.0 * half * half / angle)
    };
    Pose { x_m: along * x - across * y, y_m: across * x + along * y, heading_rad: angle }
}

/// The constant body twist that makes a displacement in `dt_s`; for headings within half a turn.
#[must_use]
pub fn log(delta: Pose, dt_s: f64) -> Twist {
    let half = delta.heading_rad / 2.0;
    let along = if half.abs() < SMALL_RAD {
        let square = half * half;
        1.0 - square / 3.0 * (1.0 + square / 15.0)
    } else {
        half / libm::tan(half)
    };
    Twist::new(
        delta.heading_rad / dt_s,
        (along * delta.x_m + half * delta.y_m) / dt_s,
        (along * delta.y_m - half * delta.x_m) / dt_s,
    )
}

impl Pose {
    /// This pose moved on by a displacement that is given in its own frame.
    #[must_use]
    pub fn then(self, delta: Self) -> Self {
        let (s, c) = (libm::sin(self.heading_rad), libm::cos(self.heading_rad));
        Self {
            x_m: self.x_m + c * delta.x_m - s * delta.y_m,
            y_m: self.y_m + s * delta.x_m + c * delta.y_m,
            heading_rad: self.heading_rad + delta.heading_rad,
        }
    }
}
