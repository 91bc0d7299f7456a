//! The stop budget against handbook mechanics, ISO 13855, and the program's own shaper and drivers.
#![expect(clippy::unwrap_used, reason = "a test says what went wrong by stopping")]

use gripline::base::pose;
use gripline::base::{PerWheel, Pose, Twist};
use gripline::config::{EXAMPLE, Plan, parse};
use gripline::core::budget::{
    BudgetRow, Guard, PaceMotion, WALKING_M_S, budget, farthest, paces_that_fit, warnings,
};
use gripline::core::settings::shaper_settings;
use gripline::shaping::{Frame, Goal, Shaper, Sticks};

const FOUR_OMNI: &str = include_str!("../config/four-omni.toml");
const THREE_OMNI: &str = include_str!("../config/three-omni.toml");

fn plan(text: &str) -> Plan {
    parse(text, "x.toml").unwrap().0
}

fn row(plan: &Plan, guard: Guard, pace: usize) -> BudgetRow {
    budget(plan).into_iter().find(|it| it.guard == guard && it.pace == pace).unwrap()
}

fn near(got: f64, expected: f64, within: f64) {
    assert!((got - expected).abs() <= within, "{got} is not {expected} within {within}");
}

/// One pace of a point that does not turn, braking with `a_m_s2`, on a line that takes no time.
fn point(v_m_s: f64, a_m_s2: f64) -> Plan {
    let mut plan = plan(EXAMPLE);
    plan.outline_m = [0.0, 0.0];
    plan.paces.truncate(1);
    plan.paces[0].pace.travel_m_s = v_m_s;
    plan.limits.stop_m_s2 = a_m_s2;
    plan.limits.turn_rad_s2 = 1e9;
    plan.guard.driver_ms = Some(0.0);
    for wheel in &mut plan.wheels {
        (wheel.max_rad_s, wheel.max_rad_s2) = (1e9, 1e12);
    }
    for link in &mut plan.links {
        (link.baud, link.latency_ms) = (u32::MAX, 0.0);
    }
    plan
}

/// Handbook mechanics d = v t + v^2 / 2a, t + v / a: rows v, t, a, distance, time.
const STOPS: [[f64; 5]; 11] = [
    [0.25, 0.1, 0.5, 0.0875, 0.6],
    [0.5, 0.1, 1.0, 0.175, 0.6],
    [1.0, 0.0, 1.0, 0.5, 1.0],
    [1.0, 0.1, 1.0, 0.6, 1.1],
    [1.0, 0.25, 2.0, 0.5, 0.75],
    [1.5, 0.2, 1.5, 1.05, 1.2],
    [2.0, 0.15, 2.5, 1.1, 0.95],
    [0.8, 0.05, 0.4, 0.84, 2.05],
    [3.0, 0.3, 3.0, 2.4, 1.3],
    [0.1, 0.02, 0.2, 0.027, 0.52],
    [1.6, 0.5, 0.8, 2.4, 2.5],
];

#[test]
fn a_silent_host_stops_as_handbook_mechanics_say() {
    for [v, t, a, distance_m, time_s] in STOPS {
        let mut plan = point(v, a);
        plan.links[0].valid_ms = (t * 1e3) as u16;
        let row = row(&plan, Guard::HostSilent, 0);
        near(row.total_s.unwrap(), time_s, 1e-9);
        near(row.distance_m.unwrap(), distance_m, 1e-9);
    }
}

/// Worst travel after the last good command: a watchdog runs out, the next tick sees it, the line takes its time, then
/// braking (common practice): rows v, timeout, tick, line, a, detect and tick, travel.
const WATCHDOGS: [[f64; 7]; 4] = [
    [1.0, 0.1, 0.01, 0.005, 1.5, 0.11, 0.448333333333333],
    [0.5, 0.2, 0.02, 0.01, 1.0, 0.22, 0.24],
    [2.0, 0.05, 0.005, 0.002, 3.0, 0.055, 0.780666666666667],
    [1.5, 0.25, 0.02, 0.016, 1.0, 0.27, 1.554],
];

#[test]
fn quiet_feedback_stops_as_a_watchdog_does() {
    for [v, timeout_s, tick_s, line_s, a, seen_s, travel_m] in WATCHDOGS {
        let mut plan = point(v, a);
        plan.guard.feedback_quiet_ms = timeout_s * 1e3;
        plan.tick.rate_hz = 1.0 / tick_s;
        plan.links[0].latency_ms = line_s * 1e3;
        let row = row(&plan, Guard::FeedbackQuiet, 0);
        near(row.detect_s + row.tick_s, seen_s, 1e-9);
        // The ramp is sent in whole milliseconds, rounded up, and frames take a microsecond even here.
        near(row.distance_m.unwrap(), travel_m, v * 0.0005 + v * 2e-6);
    }
}

/// ISO 13855:2010, 6.2.4: S = 1600 T + 850 mm for a body; K T is what the budget calls the person's way.
#[test]
fn a_person_walks_as_iso_13855_says() {
    near(WALKING_M_S, 1.6, 0.0);
    for (t_s, s_mm) in [(0.1, 1010.0), (0.25, 1250.0), (0.5, 1650.0)] {
        // A ramp of 1 ms is the shortest that there is.
        let mut plan = point(1e-6, 1e6);
        plan.links[0].valid_ms = (t_s * 1e3) as u16 - 1;
        near(row(&plan, Guard::HostSilent, 0).person_m.unwrap() * 1e3 + 850.0, s_mm, 1e-6);
    }
}

#[test]
fn every_row_is_the_sum_of_its_parts() {
    for text in [EXAMPLE, FOUR_OMNI, THREE_OMNI] {
        let plan = plan(text);
        let rows = budget(&plan);
        for it in &rows {
            let pace = &plan.paces[it.pace].pace;
            let v = pace.travel_m_s + pace.turn_rad_s * plan.outline_m[0].hypot(plan.outline_m[1]) / 2.0;
            let (ramp_s, total_s) = (it.ramp_s.unwrap(), it.total_s.unwrap());
            let before_s = it.detect_s + it.tick_s + it.wire_s + it.driver_s;
            near(total_s, before_s + it.smoothing_s + ramp_s, 1e-12);
            let a = v / ramp_s;
            near(it.distance_m.unwrap(), v * (before_s + it.smoothing_s / 2.0) + v * v / (2.0 * a), 1e-12);
            near(it.person_m.unwrap(), 1.6 * total_s, 1e-12);
            assert_eq!(it.smoothing_s > 0.0, it.category == 2, "{it:?}");
        }
        let skids = usize::from(plan.wheels.len() > 3);
        let on_change = usize::from(!plan.pad.wired);
        assert_eq!(rows.len(), plan.paces.len() * (14 + skids + on_change));
    }
}

#[test]
fn guards_are_seen_after_their_own_times() {
    let mut plan = plan(FOUR_OMNI);
    plan.guard.driver_ms = Some(15.0);
    plan.pad.wired = false;
    let detect = |guard| row(&plan, guard, 0).detect_s;
    // The next feedback answers the next frame, at 200 Hz, and is 38 bytes of ten bits long with two channels (DESIGN:
    // section 5); drivers that refuse frames send it every 20 ms.
    let line_s = 380.0 / 460_800.0;
    let (answered_s, unanswered_s) = (0.005 + line_s, 0.02 + line_s);
    for (guard, expected_s) in [
        (Guard::Release, 0.0),
        (Guard::StopAsked, 0.0),
        (Guard::PadGone, 0.0),
        (Guard::PadQuietStream, 0.2),
        (Guard::PadQuietChange, 2.0),
        (Guard::FeedbackQuiet, 0.1),
        (Guard::NotHeard, 0.1),
        (Guard::WriteFails, 0.1),
        (Guard::LateTick, 0.05),
        (Guard::DriverSays, unanswered_s),
        (Guard::NotFollowing, 0.515 + answered_s),
        (Guard::NotSlowing, 0.215 + unanswered_s),
        // 0.1 rad at 5 % of 20 rad/s.
        (Guard::Runaway, 0.395 + 0.1 + answered_s),
        (Guard::Skid, 0.6 + answered_s),
        (Guard::HostSilent, 0.1),
        (Guard::DriverRestart, 0.0),
    ] {
        near(detect(guard), expected_s, 1e-12);
    }
}

#[test]
fn what_waits_on_the_line_is_in_the_budget() {
    let mut plan = plan(EXAMPLE);
    let link = &mut plan.links[0];
    (link.baud, link.fifo_bytes, link.latency_ms, link.channels) = (115_200, 128, 4.0, 4);
    // Two Drive frames of 22 bytes, the empty frame and the Stop of 10 bytes, and the FIFO (DESIGN: section 5).
    let bytes = 2.0 * 22.0 + 1.0 + 10.0 + 128.0;
    near(row(&plan, Guard::StopAsked, 0).wire_s, bytes * 10.0 / 115_200.0 + 0.004, 1e-12);
}

#[test]
fn without_a_measured_coast_category_0_is_unknown() {
    let mut plan = plan(EXAMPLE);
    plan.bay.coast_m_s2 = None;
    for it in budget(&plan) {
        assert_eq!(it.category == 0, it.total_s.is_none(), "{it:?}");
        assert_eq!(
            it.total_s.is_some(),
            it.distance_m.is_some() && it.person_m.is_some() && it.ramp_s.is_some()
        );
    }
    assert!(warnings(&plan).iter().any(|it| it.contains("coast_m_s2")));
    plan.guard.stop_category = gripline::config::StopCategory::Zero;
    assert_eq!(row(&plan, Guard::StopAsked, 0).total_s, None);
    plan.bay.coast_m_s2 = Some(0.5);
    let it = row(&plan, Guard::StopAsked, 0);
    near(it.ramp_s.unwrap(), PaceMotion::new(&plan, &plan.paces[0].pace).outermost_m_s / 0.5, 1e-12);
}

#[test]
fn a_pace_that_the_bay_does_not_bear_is_named() {
    let mut plan = plan(EXAMPLE);
    let rows = budget(&plan);
    let (slow, fast) = (farthest(&rows, 0).unwrap().1, farthest(&rows, 1).unwrap().1);
    assert!(slow < fast);
    plan.bay.clear_m = Some((slow + fast) / 2.0);
    assert_eq!(paces_that_fit(&plan), [true, false]);
    let told = warnings(&plan);
    assert!(told.iter().any(|it| it.contains("\"walk\"") && it.contains("pad quiet")), "{told:?}");
    assert!(!told.iter().any(|it| it.contains("\"creep\"")), "{told:?}");
    plan.bay.clear_m = None;
    assert_eq!(paces_that_fit(&plan), [true, true]);
}

/// The host's own stop, ticked through the shaper, out of full travel and turn in both frames: no longer and no further
/// than the budget's ramp and smoothing say.
#[test]
fn the_shaper_stops_within_the_budget() {
    for text in [EXAMPLE, FOUR_OMNI, THREE_OMNI] {
        let plan = plan(text);
        for (at, pace) in plan.paces.iter().enumerate() {
            let (row, motion) = (row(&plan, Guard::Release, at), PaceMotion::new(&plan, &pace.pace));
            for frame in [Frame::Base, Frame::Room] {
                let settings = shaper_settings(&plan);
                let period_s = settings.period_s;
                let mut shaper = Shaper::new(settings);
                shaper.request_frame(frame);
                let sticks = Sticks { x: 0.8, y: 0.6, turn: 1.0 };
                let mut heading_rad = 0.0;
                for _ in 0..2_000 {
                    let shaped = shaper.step(Goal::Follow { sticks, pace: pace.pace }, heading_rad);
                    heading_rad += shaped.in_base_frame.turn_rad_s * period_s;
                }
                let radius_m = plan.outline_m[0].hypot(plan.outline_m[1]) / 2.0;
                let (mut ticks, mut way_m) = (0_u32, 0.0);
                while !shaper.at_rest() {
                    let shaped = shaper.step(Goal::Stop, heading_rad);
                    heading_rad += shaped.in_base_frame.turn_rad_s * period_s;
                    let twist = shaped.in_base_frame;
                    way_m += (twist.travel_m_s() + radius_m * twist.turn_rad_s.abs()) * period_s;
                    ticks += 1;
                    assert!(ticks < 10_000);
                }
                let planned_s = row.smoothing_s + motion.host_ramp_s;
                assert!(
                    f64::from(ticks) * period_s <= planned_s + period_s + 1e-9,
                    "{ticks} ticks, {planned_s} s"
                );
                let planned_m = motion.outermost_m_s * (row.smoothing_s + motion.host_ramp_s) / 2.0;
                assert!(way_m <= planned_m + 1e-9, "{way_m} m, {planned_m} m");
                // And the plan is no fiction: at full pace it is nearly reached.
                assert!(frame == Frame::Room || f64::from(ticks) * period_s > 0.5 * planned_s);
            }
        }
    }
}

/// The drivers' ramp out of a turning travel, integrated: the base ends where the budget says, off the straight line.
#[test]
fn a_ramp_of_the_drivers_bends_the_path_by_what_is_said() {
    let plan = plan(EXAMPLE);
    for pace in &plan.paces {
        let motion = PaceMotion::new(&plan, &pace.pace);
        let steps = 20_000;
        let dt = motion.driver_ramp_s / f64::from(steps);
        let mut at = Pose { x_m: 0.0, y_m: 0.0, heading_rad: 0.0 };
        for step in 0..steps {
            let left = 1.0 - (f64::from(step) + 0.5) / f64::from(steps);
            let twist = Twist::new(pace.pace.turn_rad_s, pace.pace.travel_m_s, 0.0).scaled(left);
            at = at.then(pose::exp(twist, dt));
        }
        near(at.heading_rad, motion.bend_rad, 1e-9);
        near(at.y_m, motion.bend_m, 1e-9);
    }
}

/// Two boards whose ramps start apart, integrated through the pseudo-inverse in many directions: none turns the base
/// more than is said, and one turns it nearly as much.
#[test]
fn links_apart_turn_the_base_by_what_is_said() {
    let plan = plan(FOUR_OMNI);
    let pace = plan.paces.last().unwrap().pace;
    let motion = PaceMotion::new(&plan, &pace);
    assert!(motion.apart_s > 0.0);
    let mut worst = 0.0_f64;
    for degrees in 0..360 {
        let (s, c) = f64::from(degrees).to_radians().sin_cos();
        for turn in [-1.0, 1.0] {
            let twist = Twist::new(turn * pace.turn_rad_s, pace.travel_m_s * c, pace.travel_m_s * s);
            let speeds = plan.layout.wheel_speeds(twist);
            for late in 0..2 {
                // What the wheels of the late board roll further; the same ramp cancels out.
                let further: PerWheel<f64> = speeds
                    .iter()
                    .zip(&plan.wheels)
                    .map(|(speed, wheel)| if wheel.link == late { speed * motion.apart_s } else { 0.0 })
                    .collect();
                worst = worst.max(plan.layout.twist(&further).turn_rad_s.abs());
            }
        }
    }
    assert!(worst <= motion.apart_yaw_rad * (1.0 + 1e-9), "{worst} {}", motion.apart_yaw_rad);
    assert!(worst > 0.99 * motion.apart_yaw_rad, "{worst} {}", motion.apart_yaw_rad);
    let single = PaceMotion::new(&self::plan(EXAMPLE), &pace);
    near(single.apart_s + single.apart_yaw_rad, 0.0, 0.0);
}

#[test]
fn every_trip_has_its_guard() {
    use gripline::core::cause::{Cause, DriverTrouble, StopBy};
    assert_eq!(Guard::of(&Cause::StopAsked(StopBy::Squeeze)), Some(Guard::StopAsked));
    assert_eq!(Guard::of(&Cause::NoTick), Some(Guard::LateTick));
    assert_eq!(
        Guard::of(&Cause::DriverSays { link: 0, what: DriverTrouble::IdentityChanged }),
        Some(Guard::DriverSays)
    );
    // One that starts anew is without torque at once: no ramp, and nobody's stop would be quicker.
    assert_eq!(
        Guard::of(&Cause::DriverSays { link: 0, what: DriverTrouble::Restarted }),
        Some(Guard::DriverRestart)
    );
    assert_eq!(Guard::of(&Cause::NotCleared { link: 0 }), None);
    let mut names: Vec<_> = Guard::ALL.iter().map(|it| it.name()).collect();
    names.sort_unstable();
    names.dedup();
    assert_eq!(names.len(), Guard::ALL.len());
}

/// 0.25 m/s on wheels of 50 mm is 5 rad/s; of 24 or 30 rad/s at most, 10 % is less, a quarter is more.
#[test]
fn a_pace_too_slow_to_see_a_stuck_wheel_at_is_told() {
    let mut plan = plan(EXAMPLE);
    let told = |plan: &Plan| warnings(plan).iter().any(|it| it.contains("stuck is not seen"));
    assert!(!told(&plan));
    plan.guard.follow_share = 0.4;
    assert!(told(&plan), "{:?}", warnings(&plan));
}
