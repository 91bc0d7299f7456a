//! The findings as JSON, numbers in full precision; what cannot be known is null.

use serde::Serialize;

use super::Findings;
use crate::base::analysis::Analysis;

/// All of it, in the order of the keys.
#[derive(Clone, Debug, Serialize)]
pub struct Check {
    wheels: Vec<Wheel>,
    layout: Vec<[f64; 3]>,
    rank: usize,
    singular_values: Vec<f64>,
    /// Null below rank 3.
    condition: f64,
    forward: [Vec<f64>; 3],
    skid_basis: Vec<Vec<f64>>,
    reach: Vec<Reach>,
    turn_rad_s: Option<f64>,
    room_travel_m_s: Option<f64>,
    links: Vec<Link>,
    stop_budget: Vec<Stop>,
    warnings: Vec<String>,
}

#[derive(Clone, Debug, Serialize)]
struct Wheel {
    row: [f64; 3],
}

#[derive(Clone, Debug, Serialize)]
struct Reach {
    direction_deg: f64,
    travel_m_s: f64,
}

#[derive(Clone, Debug, Serialize)]
struct Link {
    name: String,
    to_drivers_load: f64,
    from_drivers_load: f64,
}

#[derive(Clone, Debug, Serialize)]
struct Stop {
    guard: &'static str,
    pace: String,
    detect_s: f64,
    tick_s: f64,
    smoothing_s: f64,
    wire_s: f64,
    driver_s: f64,
    ramp_s: Option<f64>,
    total_s: Option<f64>,
    distance_m: Option<f64>,
    person_m: Option<f64>,
}

impl Check {
    /// The findings about a plan.
    #[must_use]
    pub fn new(it: &Findings<'_>) -> Self {
        let links = it.plan.links.iter().map(|link| {
            let [to_drivers_load, from_drivers_load] = link.load(&it.plan.tick);
            Link { name: link.name.clone(), to_drivers_load, from_drivers_load }
        });
        let reach = it
            .directions()
            .into_iter()
            .map(|(direction_deg, travel_m_s)| Reach { direction_deg, travel_m_s });
        let stops = it.budget.iter().map(|row| Stop {
            guard: row.guard.name(),
            pace: it.plan.paces.get(row.pace).map(|it| it.name.clone()).unwrap_or_default(),
            detect_s: row.detect_s,
            tick_s: row.tick_s,
            smoothing_s: row.smoothing_s,
            wire_s: row.wire_s,
            driver_s: row.driver_s,
            ramp_s: row.ramp_s,
            total_s: row.total_s,
            distance_m: row.distance_m,
            person_m: row.person_m,
        });
        Self {
            reach: reach.collect(),
            turn_rad_s: Some(it.reach.turn_rad_s()),
            room_travel_m_s: Some(it.reach.room_travel_m_s()),
            links: links.collect(),
            stop_budget: stops.collect(),
            warnings: it.warnings.clone(),
            ..Self::of_wheels(&it.analysis)
        }
    }

    /// What can still be said about wheels whose configuration is refused; the impossible motions are the warnings.
    #[must_use]
    pub fn of_wheels(it: &Analysis) -> Self {
        Self {
            wheels: it.h.iter().map(|row| Wheel { row: *row }).collect(),
            layout: it.h.clone(),
            rank: it.rank,
            singular_values: it.singular_values.clone(),
            condition: it.condition,
            forward: it.forward.clone(),
            skid_basis: it.skid_basis.clone(),
            reach: Vec::new(),
            turn_rad_s: None,
            room_travel_m_s: None,
            links: Vec::new(),
            stop_budget: Vec::new(),
            warnings: it.impossible.clone(),
        }
    }
}
