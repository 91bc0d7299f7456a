//! How fast the base can go: the exact set of travel velocities at rest in turn, and the greatest turn rate.

use super::{Layout, PerWheel};

/// Greatest speeds of a layout with limited wheels.
#[derive(Clone, Debug, PartialEq)]
pub struct Reach {
    corners: Vec<[f64; 2]>,
    turn_rad_s: f64,
    room_travel_m_s: f64,
    /// (travel part of the row, greatest speed) a wheel.
    wheels: Vec<([f64; 2], f64)>,
}

impl Reach {
    /// From the layout and the greatest speed of each wheel in rad/s.
    #[must_use]
    pub fn new(layout: &Layout, max_rad_s: &PerWheel<f64>) -> Self {
        let wheels: Vec<_> =
            layout.rows().iter().zip(max_rad_s).map(|(row, &max)| ([row[1], row[2]], max)).collect();
        let turn_rad_s = layout
            .rows()
            .iter()
            .zip(max_rad_s)
            .map(|(row, max)| max / row[0].abs())
            .fold(f64::INFINITY, f64::min);
        let room_travel_m_s =
            wheels.iter().map(|([x, y], max)| max / libm::hypot(*x, *y)).fold(f64::INFINITY, f64::min);
        Self { corners: polygon(&wheels), turn_rad_s, room_travel_m_s, wheels }
    }

    /// Corners of the polygon of travel velocities (x, y) in m/s that the wheels can make without turning the base,
    /// in the base frame, anticlockwise.
    #[must_use]
    pub fn corners(&self) -> &[[f64; 2]] {
        &self.corners
    }

    /// Greatest travel speed in a direction of the base frame, without turning.
    #[must_use]
    pub fn travel_m_s(&self, direction_rad: f64) -> f64 {
        let (s, c) = (libm::sin(direction_rad), libm::cos(direction_rad));
        self.wheels.iter().map(|([x, y], max)| max / (x * c + y * s).abs()).fold(f64::INFINITY, f64::min)
    }

    /// Greatest turn rate, without travel; the same in both frames.
    #[must_use]
    pub fn turn_rad_s(&self) -> f64 {
        self.turn_rad_s
    }

    /// Greatest travel speed in the room frame: in every direction at every heading.
    #[must_use]
    pub fn room_travel_m_s(&self) -> f64 {
        self.room_travel_m_s
    }
}

/// Cuts the strip of each wheel out of a square that is larger than all of them (Sutherland & Hodgman, one half plane
/// at a time).
fn polygon(wheels: &[([f64; 2], f64)]) -> Vec<[f64; 2]> {
    let far = wheels.iter().map(|([x, y], max)| max / libm::hypot(*x, *y)).fold(0.0, f64::max) * 1e6;
    let mut corners = vec![[far, far], [-far, far], [-far, -far], [far, -far]];
    for ([x, y], max) in wheels {
        for sign in [1.0, -1.0] {
            let inside = |p: &[f64; 2]| max - sign * (x * p[0] + y * p[1]);
            let mut kept = Vec::with_capacity(corners.len() + 1);
            for (i, p) in corners.iter().enumerate() {
                let q = &corners[(i + 1) % corners.len()];
                let (at_p, at_q) = (inside(p), inside(q));
                if at_p >= 0.0 {
                    kept.push(*p);
                }
                if (at_p > 0.0 && at_q < 0.0) || (at_p < 0.0 && at_q > 0.0) {
                    let share = at_p / (at_p - at_q);
                    kept.push([p[0] + share * (q[0] - p[0]), p[1] + share * (q[1] - p[1])]);
                }
            }
            corners = kept;
        }
    }
    let size = corners.iter().map(|p| libm::hypot(p[0], p[1])).fold(0.0, f64::max);
    let mut distinct: Vec<[f64; 2]> = Vec::with_capacity(corners.len());
    for p in corners {
        let near = |q: &[f64; 2]| libm::hypot(p[0] - q[0], p[1] - q[1]) < 1e-12 * size;
        let closes = distinct.len() > 1 && distinct.first().is_some_and(near);
        if !closes && !distinct.last().is_some_and(near) {
            distinct.push(p);
        }
    }
    distinct
}
