//! The layout matrix H (u = H V), its pseudo-inverse and the projection on what no rigid motion makes.
//!
//! Row of a wheel at (x, y), rolling direction beta, roller angle gamma, radius r (Muir & Neuman 1987 in constraint
//! form; Campion, Bastin & d'Andrea-Novel 1996):
//! `(1 / (r cos gamma)) [x sin(beta+gamma) - y cos(beta+gamma), cos(beta+gamma), sin(beta+gamma)]`.
//!
//! The core's numbers must be the same on every machine, so H is factored here, by Gram-Schmidt in plain arithmetic,
//! and not by a library that picks instructions at run time.

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

impl Wheel {
    /// The wheel's row of H: rad/s of the wheel per rad/s of turn and per m/s along x and y.
    #[must_use]
    pub fn row(&self) -> [f64; 3] {
        let along = self.drive_rad + self.roller_rad;
        let (s, c) = (libm::sin(along), libm::cos(along));
        let k = 1.0 / (self.radius_m * libm::cos(self.roller_rad));
        [k * (self.x_m * s - self.y_m * c), k * c, k * s]
    }
}

/// A layout of full rank: wheel speeds from a twist and back.
#[derive(Clone, Debug, PartialEq)]
pub struct Layout {
    rows: PerWheel<[f64; 3]>,
    /// Row i of the pseudo-inverse transposed: what wheel i adds to the twist.
    forward: PerWheel<[f64; 3]>,
    /// Orthonormal basis of the range of H, a row a wheel.
    range: PerWheel<[f64; 3]>,
}

/// Why a set of wheels is no layout.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum LayoutProblem {
    /// Fewer than three wheels.
    #[error("{0} wheels cannot command three motions (turn, forward, sideways); at least 3 are needed")]
    TooFew(usize),
    /// More than the program takes.
    #[error("{0} wheels are more than the {max} that one base may have", max = super::MAX_WHEELS)]
    TooMany(usize),
    /// A number is not finite, or a roller lies along the rolling direction.
    #[error("wheel {0} (counted from 0) has no row: its radius or roller angle is impossible")]
    NoRow(usize),
    /// Some motion turns no wheel.
    #[error("these wheels cannot make every motion: {0}")]
    Deficient(String),
}

impl Layout {
    /// Checks the wheels and builds the matrices.
    ///
    /// # Errors
    /// When there are too few or too many wheels, one has no row, or the rank is below three.
    pub fn new(wheels: &[Wheel]) -> Result<Self, LayoutProblem> {
        if wheels.len() < 3 {
            return Err(LayoutProblem::TooFew(wheels.len()));
        }
        if wheels.len() > super::MAX_WHEELS {
            return Err(LayoutProblem::TooMany(wheels.len()));
        }
        let analysis = super::analysis::analyse(wheels);
        if let Some(wheel) = analysis.h.iter().position(|row| row.iter().any(|it| !it.is_finite())) {
            return Err(LayoutProblem::NoRow(wheel));
        }
        if analysis.rank < 3 {
            return Err(LayoutProblem::Deficient(analysis.impossible.join("; ")));
        }
        Self::new_of_full_rank(wheels, analysis.characteristic_m)
    }

    /// For wheels that are known to have rank three.
    pub(super) fn new_of_full_rank(wheels: &[Wheel], characteristic_m: f64) -> Result<Self, LayoutProblem> {
        if wheels.len() > super::MAX_WHEELS {
            return Err(LayoutProblem::TooMany(wheels.len()));
        }
        let rows: PerWheel<[f64; 3]> = wheels.iter().map(Wheel::row).collect();
        let (range, upper) = factored(&rows, characteristic_m);
        let forward = range.iter().map(|q| solved(&upper, q, characteristic_m)).collect();
        Ok(Self { rows, forward, range })
    }

    /// Rows of the layout matrix H (m x 3), columns (turn, x, y); rad/s of wheel per rad/s and per m/s.
    #[must_use]
    pub fn rows(&self) -> &PerWheel<[f64; 3]> {
        &self.rows
    }

    /// The pseudo-inverse, transposed (m x 3): what one rad/s of each wheel adds to (turn, x, y).
    #[must_use]
    pub fn forward(&self) -> &PerWheel<[f64; 3]> {
        &self.forward
    }

    /// u = H V, rad/s a wheel.
    #[must_use]
    pub fn wheel_speeds(&self, twist: Twist) -> PerWheel<f64> {
        self.rows.iter().map(|row| dot(row, twist)).collect()
    }

    /// Least-squares twist of wheel speeds (or of wheel angles: then the twist is a displacement).
    #[must_use]
    pub fn twist(&self, wheel_rad_s: &PerWheel<f64>) -> Twist {
        let mut sum = [0.0; 3];
        for (part, speed) in self.forward.iter().zip(wheel_rad_s) {
            add_scaled(&mut sum, part, *speed);
        }
        let [turn, x, y] = sum;
        Twist::new(turn, x, y)
    }

    /// The part of the wheel speeds that no motion of a rigid base makes: the projection on the left null space.
    #[must_use]
    pub fn skid(&self, wheel_rad_s: &PerWheel<f64>) -> PerWheel<f64> {
        let mut inside = [0.0; 3];
        for (q, speed) in self.range.iter().zip(wheel_rad_s) {
            add_scaled(&mut inside, q, *speed);
        }
        let [a, b, c] = inside;
        self.range.iter().zip(wheel_rad_s).map(|([x, y, z], speed)| speed - (x * a + y * b + z * c)).collect()
    }

    /// Orthonormal basis of the range of H, a row a wheel.
    pub(super) fn range(&self) -> &PerWheel<[f64; 3]> {
        &self.range
    }
}

fn dot(row: &[f64; 3], twist: Twist) -> f64 {
    let [turn, x, y] = row;
    turn * twist.turn_rad_s + x * twist.x_m_s + y * twist.y_m_s
}

fn add_scaled(sum: &mut [f64; 3], part: &[f64; 3], by: f64) {
    for (sum, part) in sum.iter_mut().zip(part) {
        *sum += part * by;
    }
}

/// H with its turn column divided by `characteristic_m`, as Q R with orthonormal columns of Q (a row a wheel) and R
/// upper triangular: Gram-Schmidt done twice ("twice is enough", Parlett, The Symmetric Eigenvalue Problem, 6.9).
fn factored(rows: &PerWheel<[f64; 3]>, characteristic_m: f64) -> (PerWheel<[f64; 3]>, [[f64; 3]; 3]) {
    let mut q: PerWheel<[f64; 3]> =
        rows.iter().map(|[turn, x, y]| [turn / characteristic_m, *x, *y]).collect();
    let mut upper = [[0.0; 3]; 3];
    for column in 0..3 {
        for _twice in 0..2 {
            for before in 0..column {
                let shared: f64 = q.iter().map(|row| row[before] * row[column]).sum();
                upper[before][column] += shared;
                for row in &mut q {
                    row[column] -= shared * row[before];
                }
            }
        }
        let norm = libm::sqrt(q.iter().map(|row| row[column] * row[column]).sum());
        upper[column][column] = norm;
        for row in &mut q {
            row[column] /= norm;
        }
    }
    (q, upper)
}

/// R x = q by back substitution, with the turn part brought back to its own unit.
fn solved(upper: &[[f64; 3]; 3], q: &[f64; 3], characteristic_m: f64) -> [f64; 3] {
    let [[r00, r01, r02], [_, r11, r12], [_, _, r22]] = *upper;
    let y = q[2] / r22;
    let x = (q[1] - r12 * y) / r11;
    let turn = (q[0] - r01 * x - r02 * y) / r00;
    [turn / characteristic_m, x, y]
}
