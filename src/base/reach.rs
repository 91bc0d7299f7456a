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

/// Every crossing of two strips' edges that lies inside all strips, anticlockwise. There are at most 32 wheels, so trying
/// all pairs is quick, and unlike cutting edge by edge it does not mind strips that coincide.
fn polygon(wheels: &[([f64; 2], f64)]) -> Vec<[f64; 2]> {
    let edges: Vec<([f64; 2], f64)> =
        wheels.iter().flat_map(|(row, max)| [(*row, *max), (*row, -*max)]).collect();
    let mut corners: Vec<[f64; 2]> = Vec::new();
    for (i, ([ax, ay], a)) in edges.iter().enumerate() {
        for ([bx, by], b) in edges.iter().skip(i + 1) {
            let across = ax * by - ay * bx;
            if across.abs() < 1e-9 * libm::hypot(*ax, *ay) * libm::hypot(*bx, *by) {
                continue;
            }
            let corner = [(a * by - b * ay) / across, (b * ax - a * bx) / across];
            let inside = wheels
                .iter()
                .all(|([x, y], max)| (x * corner[0] + y * corner[1]).abs() <= max * (1.0 + 1e-9));
            let size = libm::hypot(corner[0], corner[1]);
            let known =
                corners.iter().any(|it| libm::hypot(it[0] - corner[0], it[1] - corner[1]) < 1e-9 * size);
            if inside && !known {
                corners.push(corner);
            }
        }
    }
    corners.sort_by(|a, b| libm::atan2(a[1], a[0]).total_cmp(&libm::atan2(b[1], b[0])));
    corners
}
