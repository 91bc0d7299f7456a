//! The layout matrix and what follows from it.

use super::{PerWheel, Twist};

/// One wheel's geometry in the base frame.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Wheel {
    /// Contact point along x.
    pub x_m: f64,
    /// Contact point along y.
    pub y_m: f64,
    /// Rolling direction from +x (beta).
    pub drive_rad: f64,
    /// Free-sliding angle from the perpendicular of the rolling direction (gamma); 0 for an omni wheel.
    pub roller_rad: f64,
    /// Rolling radius.
    pub radius_m: f64,
}

/// A layout of full rank: wheel speeds from a twist and back.
#[derive(Clone, Debug)]
pub struct Layout {
    rows: PerWheel<[f64; 3]>,
}

/// Why a set of wheels is no layout.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum LayoutProblem {
    /// To be filled.
    #[error("too few wheels")]
    TooFew,
}

impl Layout {
    /// Checks the wheels and builds the matrices.
    ///
    /// # Errors
    /// When no rank of three comes about.
    pub fn new(_wheels: &[Wheel]) -> Result<Self, LayoutProblem> {
        Err(LayoutProblem::TooFew)
    }

    /// Rows of the layout matrix H (m x 3), columns (turn, x, y); rad/s of wheel per rad/s and per m/s.
    #[must_use]
    pub fn rows(&self) -> &PerWheel<[f64; 3]> {
        &self.rows
    }

    /// u = H V, rad/s a wheel.
    #[must_use]
    pub fn wheel_speeds(&self, _twist: Twist) -> PerWheel<f64> {
        PerWheel::new()
    }

    /// Least-squares twist of wheel speeds (or of wheel angles: then the twist is a displacement).
    #[must_use]
    pub fn twist(&self, _wheel_rad_s: &PerWheel<f64>) -> Twist {
        Twist::ZERO
    }

    /// The part of the wheel speeds that no motion of a rigid base makes: the projection on the left null space.
    #[must_use]
    pub fn skid(&self, _wheel_rad_s: &PerWheel<f64>) -> PerWheel<f64> {
        PerWheel::new()
    }
}
