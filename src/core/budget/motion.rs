//! How a base stops from one pace: the figures that the rows of the budget share.

use crate::base::PerWheel;
use crate::config::{LinkPlan, Plan};
use crate::core::settings::pace_ramp_ms;
use crate::shaping::Pace;
use crate::wire::size;

/// A base at full pace, travel and turn together, and its ramps to zero.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PaceMotion {
    /// Speed of the outermost point of the base.
    pub outermost_m_s: f64,
    /// The drivers' ramp, as it is sent.
    pub driver_ramp_s: f64,
    /// The host's ramp before smoothing, in the frame where it takes longer.
    pub host_ramp_s: f64,
    /// By how much a ramp of the drivers turns the path away from the straight line that the room's frame meant.
    pub bend_rad: f64,
    /// How far from that straight line the base then stands.
    pub bend_m: f64,
    /// How far apart the ramps of several links start at most; 0 with one.
    pub apart_s: f64,
    /// The yaw angle that this makes.
    pub apart_yaw_rad: f64,
}

impl PaceMotion {
    /// The figures of one pace.
    #[must_use]
    pub fn new(plan: &Plan, pace: &Pace) -> Self {
        let driver_ramp_s = f64::from(pace_ramp_ms(plan, pace)) * 1e-3;
        let bend_rad = pace.turn_rad_s * driver_ramp_s / 2.0;
        let apart_s = apart_s(plan);
        Self {
            outermost_m_s: outermost_m_s(plan, pace),
            driver_ramp_s,
            host_ramp_s: host_ramp_s(plan, pace),
            bend_rad,
            bend_m: bend_m(pace, bend_rad),
            apart_s,
            apart_yaw_rad: apart_yaw_rad(plan, pace, apart_s),
        }
    }
}

/// A corner of the outline moves with travel and turn at once, whatever their directions.
fn outermost_m_s(plan: &Plan, pace: &Pace) -> f64 {
    let [length, width] = plan.outline_m;
    pace.travel_m_s + pace.turn_rad_s * libm::hypot(length, width) / 2.0
}

/// Zero demand through the shaper with `stop_m_s2`: all parts by one factor, so the slowest part decides. In the room's
/// frame a share of each wheel's acceleration is kept for following the turning travel direction (step 4 of shaping).
fn host_ramp_s(plan: &Plan, pace: &Pace) -> f64 {
    let limits = &plan.limits;
    let grip = limits.grip_m_s2.min(pace.travel_m_s * pace.turn_rad_s);
    let floor = (pace.travel_m_s / limits.stop_m_s2).max(pace.turn_rad_s / limits.turn_rad_s2);
    plan.layout.rows().iter().zip(&plan.wheels).fold(floor, |longest, ([h_turn, x, y], wheel)| {
        let gain = libm::hypot(*x, *y);
        let speed = (h_turn.abs() * pace.turn_rad_s + gain * pace.travel_m_s).min(wheel.max_rad_s);
        // The shaper never goes below this share either.
        let left = (wheel.max_rad_s2 - gain * grip).max(wheel.max_rad_s2 * 1e-3);
        longest.max(speed / left)
    })
}

/// All wheels shrink by one factor, so the base keeps the curvature turn / travel: an arc that turns by `bend_rad`.
/// The distance of its end from the tangent at its start.
fn bend_m(pace: &Pace, bend_rad: f64) -> f64 {
    let radius_m = pace.travel_m_s / pace.turn_rad_s;
    // From half a turn on the greatest distance is the diameter.
    if bend_rad < core::f64::consts::PI { radius_m * (1.0 - libm::cos(bend_rad)) } else { 2.0 * radius_m }
}

/// Frames that wait before a stop on a link, and the stop itself: what a stop takes to be heard, at worst.
pub(super) fn wire_s(link: &LinkPlan) -> f64 {
    let fifo = usize::try_from(link.fifo_bytes).unwrap_or(usize::MAX);
    let frames = 2 * size::drive(usize::from(link.channels)) + STOP_IN_ONE_WRITE;
    link.seconds(frames.saturating_add(fifo)) + link.latency_ms * 1e-3
}

/// An empty frame, which ends whatever was cut off, and the stop.
const STOP_IN_ONE_WRITE: usize = 1 + size::STOP;

/// One link hears the stop at once, another after all that can wait on its line.
fn apart_s(plan: &Plan) -> f64 {
    if plan.links.len() < 2 {
        return 0.0;
    }
    let last = plan.links.iter().map(wire_s).fold(0.0, f64::max);
    let first = plan.links.iter().map(|it| it.seconds(STOP_IN_ONE_WRITE)).fold(f64::INFINITY, f64::min);
    last - first
}

/// Wheels that start their ramp later by t roll on by u t. What that adds to the pose's heading is their part of the
/// pseudo-inverse's turn row; the worst choice of links that are late decides.
fn apart_yaw_rad(plan: &Plan, pace: &Pace, apart_s: f64) -> f64 {
    // Radians of yaw a second of lateness: per rad/s of turn, per m/s along x and y; a link.
    let mut links: Vec<[f64; 3]> = vec![[0.0; 3]; plan.links.len()];
    let wheels: PerWheel<usize> = plan.wheels.iter().map(|it| it.link).collect();
    for ((row, forward), link) in plan.layout.rows().iter().zip(plan.layout.forward()).zip(&wheels) {
        if let Some(sum) = links.get_mut(*link) {
            sum.iter_mut().zip(row).for_each(|(sum, h)| *sum += forward[0] * h);
        }
    }
    let mut worst = 0.0_f64;
    for late in 1..(1_usize << links.len().min(crate::core::MAX_LINKS)) - 1 {
        let mut sum = [0.0; 3];
        for (_, part) in links.iter().enumerate().filter(|(link, _)| late >> link & 1 == 1) {
            sum.iter_mut().zip(part).for_each(|(sum, part)| *sum += part);
        }
        let [turn, x, y] = sum;
        worst = worst.max(turn.abs() * pace.turn_rad_s + libm::hypot(x, y) * pace.travel_m_s);
    }
    worst * apart_s
}
