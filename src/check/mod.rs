//! A configuration on paper: what the wheels can do, how loaded the lines are, what stops take. As tables, as JSON and
//! as a picture. Moves nothing.

pub mod json;
pub mod picture;
pub mod text;

use crate::base::analysis::{Analysis, analyse};
use crate::base::reach::Reach;
use crate::base::{PerWheel, Wheel};
use crate::config::{Mistake, Plan};
use crate::core::budget::{self, BudgetRow, PaceMotion};
use crate::units::{deg, rad};

/// Everything that is found out about a plan.
#[derive(Clone, Debug)]
pub struct Findings<'a> {
    /// The plan.
    pub plan: &'a Plan,
    /// Rank, condition, forward map, skid basis.
    pub analysis: Analysis,
    /// Greatest speeds.
    pub reach: Reach,
    /// Stops from each pace, in the plan's order.
    pub motions: Vec<PaceMotion>,
    /// The stop budget, pace by pace.
    pub budget: Vec<BudgetRow>,
    /// What is odd, in plain words.
    pub warnings: Vec<String>,
}

impl<'a> Findings<'a> {
    /// Works it out. `odd` is what reading the configuration had to remark.
    #[must_use]
    pub fn new(plan: &'a Plan, odd: &[Mistake]) -> Self {
        let geometry: Vec<Wheel> = plan.wheels.iter().map(|it| it.geometry).collect();
        let max_rad_s: PerWheel<f64> = plan.wheels.iter().map(|it| it.max_rad_s).collect();
        let odd = odd.iter().map(|it| format!("line {}: {}", it.line, it.what));
        Self {
            plan,
            analysis: analyse(&geometry),
            reach: Reach::new(&plan.layout, &max_rad_s),
            motions: plan.paces.iter().map(|it| PaceMotion::new(plan, &it.pace)).collect(),
            budget: budget::budget(plan),
            warnings: odd.chain(budget::warnings(plan)).collect(),
        }
    }

    /// Greatest travel speed by direction in degrees, anticlockwise from forward, ascending: the polygon's corners and
    /// every five degrees.
    #[must_use]
    pub fn directions(&self) -> Vec<(f64, f64)> {
        let mut all: Vec<(f64, f64)> =
            (0..72).map(|it| f64::from(it) * 5.0).map(|it| (it, self.reach.travel_m_s(rad(it)))).collect();
        for (direction_deg, travel_m_s) in self.corners() {
            // A corner that falls on one of the others is there already; so is one at 360 degrees.
            let off = libm::remainder(direction_deg, 5.0);
            if off.abs() > 1e-9 {
                all.push((direction_deg, travel_m_s));
            }
        }
        all.sort_by(|a, b| a.0.total_cmp(&b.0));
        all
    }

    /// The corners of the polygon: direction in degrees from 0 to 360, and speed.
    #[must_use]
    pub fn corners(&self) -> Vec<(f64, f64)> {
        let corners = self.reach.corners().iter();
        let mut all: Vec<(f64, f64)> = corners
            .map(|[x, y]| {
                // Rounding around a corner on the x axis would show it at 360.
                let direction_deg = deg(libm::atan2(*y, *x)).rem_euclid(360.0);
                (if 360.0 - direction_deg < 1e-9 { 0.0 } else { direction_deg }, libm::hypot(*x, *y))
            })
            .collect();
        all.sort_by(|a, b| a.0.total_cmp(&b.0));
        all
    }
}
