//! Where the wheels say the base is. Angles, not speeds, so that a lost frame loses nothing.

use serde::{Deserialize, Serialize};

use super::{Layout, PerWheel, Pose, pose};

/// Dead reckoning from wheel angles, with the heading from elsewhere where that is better.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Odometry {
    pose: Pose,
}

impl Odometry {
    /// Moves on by what each wheel turned since the last call, through the pseudo-inverse and the SE(2) exponential.
    /// `heading_delta_rad` replaces the turn that the wheels tell.
    pub fn step(&mut self, layout: &Layout, wheel_delta_rad: &PerWheel<f64>, heading_delta_rad: Option<f64>) {
        let mut moved = layout.twist(wheel_delta_rad);
        if let Some(turned) = heading_delta_rad {
            moved.turn_rad_s = turned;
        }
        self.pose = self.pose.then(pose::exp(moved, 1.0));
    }

    /// The pose in the room.
    #[must_use]
    pub fn pose(&self) -> Pose {
        self.pose
    }

    /// The present heading becomes zero and the room's axes turn with it, about the base; gives the angle by which
    /// the heading fell.
    pub fn zero_heading(&mut self) -> f64 {
        core::mem::replace(&mut self.pose.heading_rad, 0.0)
    }
}
