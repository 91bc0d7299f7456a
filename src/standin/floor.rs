//! The base on the floor: what the wheels make of it.

use crate::base::{Layout, PerWheel, Pose, Twist, Wheel, pose};

/// A rigid base on an even floor.
#[derive(Clone, Debug)]
pub(super) struct Floor {
    wheels: Vec<Wheel>,
    layout: Layout,
    /// Whether each wheel grips the floor.
    grips: Vec<bool>,
    /// Layout of the wheels that do, where they are enough to tell a motion.
    gripping: Option<Layout>,
    /// Distance from the base's origin to the outermost point of it.
    reach_m: f64,
    pose: Pose,
}

impl Floor {
    /// A base at the room's origin, all wheels gripping.
    pub(super) fn new(layout: &Layout, wheels: Vec<Wheel>, outline_m: [f64; 2]) -> Self {
        let [length_m, width_m] = outline_m;
        let grips = vec![true; wheels.len()];
        let reach_m = libm::hypot(length_m, width_m) / 2.0;
        Self { wheels, layout: layout.clone(), grips, gripping: None, reach_m, pose: Pose::default() }
    }

    /// Where the base is.
    pub(super) fn pose(&self) -> Pose {
        self.pose
    }

    /// Whether a wheel grips the floor or slips on it.
    pub(super) fn set_grip(&mut self, wheel: usize, grips: bool) {
        if let Some(slot) = self.grips.get_mut(wheel) {
            *slot = grips;
        }
        self.gripping = if self.grips.iter().all(|grips| *grips) {
            None
        } else {
            let rest: Vec<Wheel> = self
                .wheels
                .iter()
                .zip(&self.grips)
                .filter(|(_, grips)| **grips)
                .map(|(wheel, _)| *wheel)
                .collect();
            Layout::new(&rest).ok()
        };
    }

    /// The motion that wheel speeds (or angles) make: least squares over the wheels that grip; over all of them where
    /// the rest alone cannot tell.
    pub(super) fn twist(&self, wheel_rad_s: &PerWheel<f64>) -> Twist {
        match &self.gripping {
            None => self.layout.twist(wheel_rad_s),
            Some(gripping) => {
                let rest = wheel_rad_s.iter().zip(&self.grips).filter(|(_, grips)| **grips).map(|(u, _)| *u);
                gripping.twist(&rest.collect())
            }
        }
    }

    /// The speeds at which a motion of the base turns free wheels.
    pub(super) fn dragged(&self, twist: Twist) -> PerWheel<f64> {
        self.layout.wheel_speeds(twist)
    }

    /// Moves the base on by the angles that its wheels have turned.
    pub(super) fn roll(&mut self, wheel_rad: &PerWheel<f64>) {
        let displacement = self.twist(wheel_rad);
        self.pose = self.pose.then(pose::exp(displacement, 1.0));
    }

    /// What is left of the speed after `dt_s` of rolling freely with the deceleration `coast_m_s2` at the outermost
    /// point, as a share, and the time at full speed that would go as far.
    pub(super) fn coast(&self, twist: Twist, coast_m_s2: f64, dt_s: f64) -> (f64, f64) {
        let outermost_m_s = twist.travel_m_s() + libm::fabs(twist.turn_rad_s) * self.reach_m;
        if outermost_m_s <= coast_m_s2 * dt_s {
            let rolls_s = if coast_m_s2 > 0.0 { outermost_m_s / coast_m_s2 } else { 0.0 };
            return (0.0, rolls_s / 2.0);
        }
        let left = 1.0 - coast_m_s2 * dt_s / outermost_m_s;
        (left, dt_s * (1.0 + left) / 2.0)
    }
}
