//! The stop budget: how long and how far until the base stands, for every guard at every pace. A planning figure, from
//! handbook mechanics (d = v t + v^2 / 2a) and the walking-person allowance of ISO 13855 (S = K T, K = 1.6 m/s).

use super::settings::{ASSUMED_DRIVER_MS, ramp_ms};
use crate::base::Twist;
use crate::config::{LinkPlan, PacePlan, Plan, StopCategory};
use crate::shaping::Pace;

/// Speed of a walking person, ISO 13855:2010 (1.6 m/s for approach of the body).
pub const WALKING_M_S: f64 = 1.6;

/// One row of the budget.
#[derive(Clone, Debug, PartialEq)]
pub struct BudgetRow {
    /// The guard.
    pub guard: &'static str,
    /// Name of the pace.
    pub pace: String,
    /// Stop category (IEC 60204-1).
    pub category: u8,
    /// Until the guard notices.
    pub detect_s: f64,
    /// Until the next tick acts on it.
    pub tick_s: f64,
    /// Lag of the moving average; host ramps only.
    pub smoothing_s: f64,
    /// Two frames and the stop through adaptor and line.
    pub wire_s: f64,
    /// The drivers' own delay.
    pub driver_s: f64,
    /// The ramp; `None` where the base coasts and nobody has measured how.
    pub ramp_s: Option<f64>,
    /// All together.
    pub total_s: Option<f64>,
    /// Way of the outermost point.
    pub distance_m: Option<f64>,
    /// Way of a walking person meanwhile.
    pub person_m: Option<f64>,
}

/// How a guard stops.
#[derive(Clone, Copy, PartialEq, Eq)]
enum By {
    /// Through Stopping: the host shapes the ramp.
    Host,
    /// Through the stop line: the drivers ramp.
    Drivers,
    /// Torque off.
    Coast,
    /// The drivers, because the host has gone silent.
    Silence,
}

/// Feedback comes at least this often, so a driver's own report waits at most so long.
const FEEDBACK_EVERY_S: f64 = 0.02;

/// A row for every guard at every pace, paces in the order of the plan.
#[must_use]
pub fn budget(plan: &Plan) -> Vec<BudgetRow> {
    let guard = &plan.guard;
    let period_s = plan.tick.period_s();
    let asked = match guard.stop_category {
        StopCategory::One => By::Drivers,
        StopCategory::Zero => By::Coast,
    };
    let quiet_s = if plan.pad.wired { guard.pad_quiet_stream_ms } else { guard.pad_quiet_change_ms } * 1e-3;
    let lag_s = guard.follow_lag_s + driver_s(plan);
    let guards = [
        ("release", 0.0, By::Host),
        ("stop asked", 0.0, asked),
        ("pad gone", 0.005, By::Drivers),
        ("pad quiet", quiet_s, By::Host),
        ("feedback quiet", guard.feedback_quiet_ms * 1e-3, By::Drivers),
        ("not heard", guard.not_heard_ms * 1e-3, By::Drivers),
        ("write fails", 2.0 * period_s, By::Drivers),
        ("late tick", guard.late_ms * 1e-3, By::Drivers),
        ("driver says", FEEDBACK_EVERY_S, By::Drivers),
        ("not following", guard.follow_s, By::Drivers),
        ("runaway", guard.runaway_s + lag_s, By::Coast),
        ("skid", guard.skid_s, By::Drivers),
        ("host silent", longest_validity_s(plan), By::Silence),
    ];
    plan.paces
        .iter()
        .flat_map(|pace| guards.map(|(name, detect_s, by)| row(plan, pace, name, detect_s, by)))
        .collect()
}

fn row(plan: &Plan, pace: &PacePlan, guard: &'static str, detect_s: f64, by: By) -> BudgetRow {
    let outer_m_s = outermost_m_s(plan, pace.pace);
    let tick_s = if by == By::Silence { 0.0 } else { plan.tick.period_s() };
    let wire_s = if by == By::Silence { 0.0 } else { plan.links.iter().map(wire_s).fold(0.0, f64::max) };
    let smoothing_s = if by == By::Host { plan.limits.smoothing_s } else { 0.0 };
    let driver_s = driver_s(plan);
    let ramp_s = match by {
        By::Host | By::Drivers | By::Silence => Some(full_ramp_s(plan, pace.pace)),
        By::Coast => plan.bay.coast_m_s2.map(|coast| outer_m_s / coast),
    };
    let before_s = detect_s + tick_s + wire_s + driver_s;
    let total_s = ramp_s.map(|ramp_s| before_s + smoothing_s + ramp_s);
    BudgetRow {
        guard,
        pace: pace.name.clone(),
        category: match by {
            By::Host => 2,
            By::Drivers | By::Silence => 1,
            By::Coast => 0,
        },
        detect_s,
        tick_s,
        smoothing_s,
        wire_s,
        driver_s,
        ramp_s,
        total_s,
        // v^2 / 2a with a = v / ramp: the ramp is linear in time.
        distance_m: ramp_s.map(|ramp_s| outer_m_s * (before_s + smoothing_s / 2.0 + ramp_s / 2.0)),
        person_m: total_s.map(|it| WALKING_M_S * it),
    }
}

/// Speed of the outermost point of the base at full travel and turn together.
#[must_use]
pub fn outermost_m_s(plan: &Plan, pace: Pace) -> f64 {
    let [length, width] = plan.outline_m;
    pace.travel_m_s + pace.turn_rad_s * libm::hypot(length, width) / 2.0
}

/// The longest ramp that the drivers make from a pace: full travel in the wheels' worst direction and full turn.
#[must_use]
pub fn full_ramp_s(plan: &Plan, pace: Pace) -> f64 {
    let wheels = plan.layout.rows().iter().zip(&plan.wheels).map(|([turn, x, y], wheel)| {
        let speed = turn.abs() * pace.turn_rad_s + libm::hypot(*x, *y) * pace.travel_m_s;
        speed.min(wheel.max_rad_s) / wheel.max_rad_s2
    });
    f64::from(ramp_ms(&plan.limits, Twist::new(pace.turn_rad_s, pace.travel_m_s, 0.0), wheels)) * 1e-3
}

/// Two motion frames and a stop behind a full adaptor, at 10 bits a byte, and the adaptor's latency.
#[must_use]
pub fn wire_s(link: &LinkPlan) -> f64 {
    let frame = 2 + 6 + 2 * usize::from(link.channels) + 4 + 2;
    let bytes = (2 * frame + 11) as f64 + f64::from(link.fifo_bytes);
    bytes * 10.0 / f64::from(link.baud) + link.latency_ms * 1e-3
}

fn driver_s(plan: &Plan) -> f64 {
    plan.guard.driver_ms.unwrap_or(ASSUMED_DRIVER_MS) * 1e-3
}

fn longest_validity_s(plan: &Plan) -> f64 {
    plan.links.iter().map(|it| f64::from(it.valid_ms) * 1e-3).fold(0.0, f64::max)
}

/// Whether the bay bears each pace: a stop that a person asks, a release and a silent host fit into the free distance.
/// Without `clear_m` every pace does.
#[must_use]
pub fn paces_that_fit(plan: &Plan) -> Vec<bool> {
    let rows = budget(plan);
    plan.paces
        .iter()
        .map(|pace| {
            let Some(clear_m) = plan.bay.clear_m else { return true };
            rows.iter()
                .filter(|row| row.pace == pace.name)
                .all(|row| row.distance_m.is_none_or(|it| it <= clear_m))
        })
        .collect()
}

/// How far the base yaws in a stop because the ramps of several links start apart by as much as the slowest line
/// takes: each link's wheels run on by their speed times that span. 0 with one link.
#[must_use]
pub fn yaw_of_links_rad(plan: &Plan, pace: Pace) -> f64 {
    if plan.links.len() < 2 {
        return 0.0;
    }
    let apart_s = plan.links.iter().map(wire_s).fold(0.0, f64::max);
    (0..plan.links.len())
        .map(|link| {
            let parts = plan.layout.rows().iter().zip(plan.layout.forward()).zip(&plan.wheels);
            parts
                .filter(|(_, wheel)| wheel.link == link)
                .map(|(([turn, x, y], [forward_turn, ..]), _)| {
                    let speed = turn.abs() * pace.turn_rad_s + libm::hypot(*x, *y) * pace.travel_m_s;
                    forward_turn.abs() * speed
                })
                .sum::<f64>()
                * apart_s
        })
        .fold(0.0, f64::max)
}
