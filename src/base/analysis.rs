//! What a layout can and cannot do, for people: rank, condition, impossible motions, skid basis. Works for deficient
//! layouts too. Used at start and by `check`, never on the tick.

use nalgebra::DMatrix;

use super::{Layout, Wheel};
use crate::units::deg;

/// The figures of a set of wheels.
#[derive(Clone, Debug, PartialEq)]
pub struct Analysis {
    /// Layout matrix, m x 3, columns (turn, x, y).
    pub h: Vec<[f64; 3]>,
    /// Rank of H.
    pub rank: usize,
    /// Singular values of H with the turn column divided by `characteristic_m`, greatest first.
    pub singular_values: Vec<f64>,
    /// Greatest by least singular value; infinite below rank 3.
    pub condition: f64,
    /// RMS distance of the wheels from the base frame's origin (1 if all are there).
    pub characteristic_m: f64,
    /// Pseudo-inverse, 3 x m; empty below rank 3.
    pub forward: [Vec<f64>; 3],
    /// Orthonormal basis of the left null space, m x (m-3): wheel speeds that only skid. Empty below rank 3.
    pub skid_basis: Vec<Vec<f64>>,
    /// The motions that the wheels cannot make, in plain words.
    pub impossible: Vec<String>,
}

/// A singular value below this share of the greatest counts as none: about what twelve digits of a measured base mean.
const RANK_TOLERANCE: f64 = 1e-9;

/// Analyses any set of wheels.
#[must_use]
pub fn analyse(wheels: &[Wheel]) -> Analysis {
    let h: Vec<[f64; 3]> = wheels.iter().map(Wheel::row).collect();
    let square: f64 = wheels.iter().map(|it| it.x_m * it.x_m + it.y_m * it.y_m).sum();
    let rms = if wheels.is_empty() { 0.0 } else { libm::sqrt(square / wheels.len() as f64) };
    let characteristic_m = if rms > 0.0 && rms.is_finite() { rms } else { 1.0 };
    let mut analysis = Analysis {
        rank: 0,
        singular_values: Vec::new(),
        condition: f64::INFINITY,
        characteristic_m,
        forward: [const { Vec::new() }; 3],
        skid_basis: Vec::new(),
        impossible: Vec::new(),
        h,
    };
    if wheels.is_empty() || analysis.h.iter().flatten().any(|it| !it.is_finite()) {
        return analysis;
    }
    // Padded to three rows, so that all three right singular vectors come out.
    let scaled = DMatrix::from_fn(wheels.len().max(3), 3, |i, j| {
        let row = analysis.h.get(i).copied().unwrap_or_default();
        if j == 0 { row[0] / characteristic_m } else { row[j] }
    });
    let svd = scaled.svd(false, true);
    let mut order: Vec<usize> = (0..3).collect();
    order.sort_by(|&a, &b| svd.singular_values[b].total_cmp(&svd.singular_values[a]));
    analysis.singular_values = order.iter().map(|&it| svd.singular_values[it]).collect();
    let greatest = analysis.singular_values[0];
    analysis.rank = analysis.singular_values.iter().filter(|&&it| it > RANK_TOLERANCE * greatest).count();
    if let Some(v_t) = &svd.v_t {
        for &it in order.iter().skip(analysis.rank) {
            let row = v_t.row(it);
            analysis
                .impossible
                .push(impossible([row[0] / characteristic_m, row[1], row[2]], characteristic_m));
        }
    }
    if analysis.rank == 3 {
        analysis.condition = greatest / analysis.singular_values[2];
        if let Ok(layout) = Layout::new_of_full_rank(wheels, characteristic_m) {
            for (part, column) in analysis.forward.iter_mut().zip(0..3) {
                *part = layout.forward().iter().map(|it| it[column]).collect();
            }
            analysis.skid_basis = skid_basis(&layout);
        }
    }
    analysis
}

/// A twist that turns no wheel, in words: the wheels can neither make nor hold it.
fn impossible([turn, x, y]: [f64; 3], characteristic_m: f64) -> String {
    if turn.abs() * characteristic_m > 1e-6 {
        // To the millimetre that is shown; adding zero takes the sign off a zero.
        let [centre_x, centre_y] = [-y / turn, x / turn].map(|it| libm::round(it * 1e3) * 1e-3 + 0.0);
        format!(
            "turning about the point ({centre_x:.3}, {centre_y:.3}) m turns no wheel, so the wheels can neither make nor \
             hold that motion; turn or move at least one wheel so that its roller axle does not pass over that point"
        )
    } else {
        let direction = deg(libm::atan2(y, x)).rem_euclid(180.0);
        format!(
            "travel along {direction:.1} degrees turns no wheel, so the wheels can neither make nor hold that motion; \
             give at least one wheel another rolling or roller direction"
        )
    }
}

/// Completes the basis of the range to one of the whole space; what is added spans the left null space.
fn skid_basis(layout: &Layout) -> Vec<Vec<f64>> {
    let m = layout.rows().len();
    let mut basis: Vec<Vec<f64>> =
        (0..3).map(|j| layout.range().iter().map(|row| row[j]).collect()).collect();
    while basis.len() < m {
        // The unit vector that the basis covers least, made orthogonal twice.
        let covered = |i: usize| basis.iter().map(|b| b[i] * b[i]).sum::<f64>();
        let Some(least) = (0..m).min_by(|&a, &b| covered(a).total_cmp(&covered(b))) else { break };
        let mut next: Vec<f64> = (0..m).map(|i| if i == least { 1.0 } else { 0.0 }).collect();
        for _twice in 0..2 {
            for b in &basis {
                let shared: f64 = b.iter().zip(&next).map(|(b, n)| b * n).sum();
                next.iter_mut().zip(b).for_each(|(n, b)| *n -= shared * b);
            }
        }
        let norm = libm::sqrt(next.iter().map(|n| n * n).sum());
        next.iter_mut().for_each(|n| *n /= norm);
        basis.push(next);
    }
    (0..m).map(|i| basis.iter().skip(3).map(|b| b[i]).collect()).collect()
}
