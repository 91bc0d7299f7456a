//! The base as geometry: wheels, layout matrix, reach, skid, pose, odometry. Nothing here knows of time's passing or
//! of people. Frames: base frame x forward, y left, z up, angles anticlockwise.

pub mod analysis;
pub mod layout;
pub mod odometry;
pub mod pose;
pub mod reach;

pub use layout::{Layout, LayoutProblem, Wheel};
pub use odometry::Odometry;

use arrayvec::ArrayVec;
use serde::{Deserialize, Serialize};

/// The most wheels one base may have.
pub const MAX_WHEELS: usize = 32;

/// One number a wheel, in the order of the configuration.
pub type PerWheel<T> = ArrayVec<T, MAX_WHEELS>;

/// A planar velocity, ordered (turn, x, y) = (omega, v_x, v_y), in rad/s, m/s, m/s.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Twist {
    /// Anticlockwise turn rate.
    pub turn_rad_s: f64,
    /// Speed along x of the frame it is given in.
    pub x_m_s: f64,
    /// Speed along y of the frame it is given in.
    pub y_m_s: f64,
}

impl Twist {
    /// Standing still.
    pub const ZERO: Self = Self { turn_rad_s: 0.0, x_m_s: 0.0, y_m_s: 0.0 };

    /// A twist from its three parts, in the order (turn, x, y).
    #[must_use]
    pub const fn new(turn_rad_s: f64, x_m_s: f64, y_m_s: f64) -> Self {
        Self { turn_rad_s, x_m_s, y_m_s }
    }

    /// Speed of travel, whatever the direction.
    #[must_use]
    pub fn travel_m_s(self) -> f64 {
        libm::hypot(self.x_m_s, self.y_m_s)
    }

    /// All three parts by one factor.
    #[must_use]
    pub fn scaled(self, factor: f64) -> Self {
        Self::new(self.turn_rad_s * factor, self.x_m_s * factor, self.y_m_s * factor)
    }

    /// The same motion written in a frame that is turned by `angle_rad` against the present one: the travel part is
    /// turned by `angle_rad` (base frame to room frame: the heading; room to base: minus the heading).
    #[must_use]
    pub fn rotated(self, angle_rad: f64) -> Self {
        let (s, c) = (libm::sin(angle_rad), libm::cos(angle_rad));
        Self::new(self.turn_rad_s, c * self.x_m_s - s * self.y_m_s, s * self.x_m_s + c * self.y_m_s)
    }
}

/// Where the base is in the room: metres and radians (heading not wrapped, so that turns can be counted).
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Pose {
    /// Along the room's x.
    pub x_m: f64,
    /// Along the room's y.
    pub y_m: f64,
    /// Anticlockwise from the room's x, not wrapped.
    pub heading_rad: f64,
}
