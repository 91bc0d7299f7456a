#![expect(clippy::float_cmp, reason = "values that are set, or handed on as they are")]

use super::*;
use crate::standin::fault::Which;
use crate::standin::testing::{Host, LSB_RAD_S, ideal, plan};
use crate::wire::{FromDrivers, Mode, ToDrivers, flag, status};

const AHEAD: Twist = Twist::new(0.0, 0.5, 0.0);
const ALL_WAYS: Twist = Twist::new(0.8, 0.4, -0.2);

fn close(got: f64, expected: f64, within: f64) {
    assert!((got - expected).abs() <= within, "{got} is not {expected} within {within}");
}

#[test]
fn the_drivers_say_what_the_plan_expects() {
    let mut host = Host::new(1, SimSettings::default());
    for (index, link) in plan().links.iter().enumerate() {
        let identity = host.identity(index);
        assert_eq!(identity.name.as_str(), link.expect);
        assert_eq!(identity.channels, link.channels);
        assert_eq!(identity.speed_lsb_urad_s, link.speed_lsb_urad_s);
        assert_eq!(identity.angle_lsb_urad, link.angle_lsb_urad);
        assert!(identity.silence_ms >= link.valid_ms);
        assert_eq!(identity.flags, flag::SIMULATED | flag::YAW_RATE | flag::STOP_INPUT);
    }
    assert_ne!(host.identity(0).boot, host.identity(1).boot);
}

/// DESIGN 5: Feedback on every Drive taken and otherwise every 20 ms.
#[test]
fn feedback_comes_on_every_drive_and_otherwise_every_20_ms() {
    let mut host = Host::new(1, SimSettings::default());
    host.run_ms(1000);
    assert_eq!(host.heard.iter().filter(|(_, link, _)| *link == 0).count(), 50);
    host.heard.clear();
    host.set(Mode::Park, Twist::ZERO);
    host.run_ms(1000);
    assert_eq!(host.heard.iter().filter(|(_, link, _)| *link == 0).count(), 200);
    assert_eq!(host.feedback(0).ack, host.sequence.wrapping_sub(1));
}

#[test]
fn wheels_come_to_the_commanded_speed_and_are_measured_there_in_the_drivers_counts() {
    let mut host = Host::running(1, SimSettings::default(), ALL_WAYS);
    host.run_ms(500);
    let wanted = host.plan.layout.wheel_speeds(ALL_WAYS);
    let before = [host.feedback(0), host.feedback(1)];
    host.run_ms(1000);
    let after = [host.feedback(0), host.feedback(1)];
    for ((wheel, wanted), true_speed) in
        host.plan.wheels.iter().zip(&wanted).zip(host.sim.truth().wheel_rad_s)
    {
        close(true_speed, *wanted, LSB_RAD_S);
        let sign = if wheel.reversed { -1.0 } else { 1.0 };
        let channel = usize::from(wheel.channel);
        let (before, after) = (before[wheel.link].channels[channel], after[wheel.link].channels[channel]);
        close(f64::from(after.speed) * LSB_RAD_S * sign / wheel.gear, *wanted, LSB_RAD_S);
        let turned_rad = f64::from(after.angle.wrapping_sub(before.angle)) * 500e-6 * sign / wheel.gear;
        // One second at a speed that is rounded to half a count, and an angle rounded at both ends.
        close(turned_rad, *wanted, LSB_RAD_S / 2.0 + 500e-6);
    }
    assert_eq!(after[1].channels[1], Default::default(), "the channel without a wheel stands");
}

/// v(t) = V (1 - exp(-(t - dead) / T)): step response of a first-order lag with dead time, control engineering handbooks.
#[test]
fn a_small_step_is_followed_with_dead_time_and_lag() {
    let settings = SimSettings { dead_time_s: 0.01, ..SimSettings::default() };
    let mut host = Host::running(1, settings, Twist::new(0.0, 0.2, 0.0));
    host.run_ms(1); // the Run is heard at the beginning of this millisecond
    for ms in 1..150_u32 {
        // The drivers' command is looked at twice a millisecond.
        let t = f64::from(ms) * 1e-3 - 0.01;
        let expected = if t > 0.0 { 4.0 * (1.0 - f64::exp(-t / 0.03)) } else { 0.0 };
        let slope = 4.0 / 0.03;
        close(host.sim.truth().wheel_rad_s[0], expected, slope * 0.000_51 + LSB_RAD_S);
        host.run_ms(1);
    }
}

#[test]
fn a_circle_is_driven_as_a_circle() {
    let mut host = Host::running(1, ideal(), Twist::new(0.5, 0.3, 0.0));
    host.run_ms(500);
    let begin = host.sim.truth();
    let radius_m = begin.twist.x_m_s / begin.twist.turn_rad_s;
    for _ in 0..60 {
        host.run_ms(100);
        let now = host.sim.truth();
        let turned = now.pose.heading_rad - begin.pose.heading_rad;
        close(turned, begin.twist.turn_rad_s * now.at.since_s(begin.at), 1e-9);
        // Chord of a circle: 2 r sin(angle / 2), any book of tables.
        let chord_m = (now.pose.x_m - begin.pose.x_m).hypot(now.pose.y_m - begin.pose.y_m);
        close(chord_m, (2.0 * radius_m * (turned / 2.0).sin()).abs(), 1e-4);
    }
    close(radius_m, 0.6, 0.001);
}

/// d = v t + v^2 / 2a: stopping distance with a delay t and an even deceleration a (any mechanics text). The ramp that
/// the drivers make is linear in time.
#[test]
fn a_stop_is_a_linear_ramp_over_the_stopping_distance() {
    for dead_time_s in [0.0, 0.02] {
        let (v, ramp_ms) = (0.5, 400_u16);
        let mut host = Host::running(1, SimSettings { dead_time_s, ..ideal() }, AHEAD);
        host.run_ms(300);
        let begin = host.sim.truth();
        close(begin.twist.x_m_s, v, 1e-4);
        host.drive = None;
        host.send_all(&ToDrivers::Stop { ramp_ms });
        let a = v / (f64::from(ramp_ms) * 1e-3);
        for ms in 1..=400_u32 {
            host.run_ms(1);
            let t = (f64::from(ms) * 1e-3 - dead_time_s).max(0.0);
            close(host.sim.truth().twist.x_m_s, v - a * t, a * 0.000_51 + 1e-4);
        }
        host.run_ms(200);
        let end = host.sim.truth();
        let expected_m = v * dead_time_s + v * v / (2.0 * a);
        close(end.pose.x_m - begin.pose.x_m, expected_m, v * 0.000_51 + 1e-4);
        assert_eq!(end.twist, Twist::ZERO);
        assert!(!end.torque);
        for link in 0..2 {
            assert_eq!(host.feedback(link).status & (status::LATCHED | status::TORQUE_ON), status::LATCHED);
        }
    }
}

/// DESIGN 3: a proportional ramp keeps the wheel speeds in the range of the layout matrix, up to the rounding to counts.
#[test]
fn a_proportional_ramp_does_not_skid_the_wheels() {
    let mut host = Host::running(1, SimSettings::default(), ALL_WAYS);
    host.run_ms(400);
    host.drive = None;
    host.send_all(&ToDrivers::Stop { ramp_ms: 300 });
    let mut slowed = 0;
    for _ in 0..600 {
        host.run_ms(1);
        let truth = host.sim.truth();
        for skid in host.plan.layout.skid(&truth.wheel_rad_s) {
            close(skid, 0.0, LSB_RAD_S);
        }
        let travel = host.sim.truth().twist.travel_m_s();
        slowed += u32::from(travel > 0.05 && travel < 0.4);
    }
    assert!(slowed > 200, "the ramp was watched");
    assert_eq!(host.sim.truth().twist, Twist::ZERO);
}

/// v^2 / 2a again, with the deceleration of free rolling.
#[test]
fn without_torque_the_base_rolls_out_evenly() {
    let mut host = Host::running(1, ideal(), AHEAD);
    host.run_ms(300);
    let begin = host.sim.truth();
    host.drive = None;
    host.send_all(&ToDrivers::Stop { ramp_ms: 0 });
    host.run_ms(2000);
    let end = host.sim.truth();
    close(end.pose.x_m - begin.pose.x_m, 0.5 * 0.5 / (2.0 * 0.6), 1e-3);
    assert_eq!(end.twist, Twist::ZERO);

    let mut slippery = plan();
    slippery.bay.coast_m_s2 = Some(0.25);
    assert_eq!(Sim::new(&slippery, 1, ideal()).settings.coast_m_s2, 0.25);
}

#[test]
fn silence_of_the_host_stops_the_base() {
    let mut host = Host::running(1, ideal(), AHEAD);
    host.run_ms(300);
    let begin = host.sim.truth().pose.x_m;
    host.drive = None;
    host.run_ms(1000);
    let end = host.sim.truth();
    assert_eq!(end.twist, Twist::ZERO);
    // The last Drive is 5 ms old at most: what is left of 100 ms of validity, then a ramp of 500 ms.
    let rolled = end.pose.x_m - begin;
    assert!(rolled > 0.5 * (0.095 + 0.25) - 2e-3 && rolled < 0.5 * (0.1 + 0.25) + 2e-3, "{rolled}");
    assert_eq!(host.feedback(0).status & status::WENT_SILENT, status::WENT_SILENT);
}

#[test]
fn the_same_seed_gives_the_same_bytes_and_path_and_another_seed_others() {
    let run = |seed| {
        let mut host = Host::running(seed, SimSettings::default(), ALL_WAYS);
        host.sim.fault(Fault::Link(Which::All, LinkFault::Noisy(0.001)));
        host.sim.fault(Fault::Link(Which::One(0), LinkFault::Lossy(0.1)));
        host.run_ms(1000);
        (host.heard.clone(), host.garbled, host.sim.truth())
    };
    assert_eq!(run(5), run(5));
    assert_ne!(run(5).0, run(6).0);
}

#[test]
fn motion_does_not_depend_on_how_often_time_is_told() {
    let mut fine = Host::running(1, SimSettings::default(), ALL_WAYS);
    fine.valid_ms = 900;
    fine.run_ms(50);
    let mut coarse = fine.sim.clone();
    fine.drive = None;
    fine.run_ms(600);
    coarse.step(fine.now);
    assert_eq!(coarse.truth(), fine.sim.truth());
}

#[test]
fn the_gyro_reads_the_turn_rate_with_its_bias_and_noise() {
    let mut host = Host::running(3, SimSettings::default(), Twist::new(0.6, 0.0, 0.0));
    host.run_ms(300);
    host.heard.clear();
    host.run_ms(5000);
    let readings: Vec<f64> = host
        .heard
        .iter()
        .filter_map(|(_, link, message)| match message {
            FromDrivers::Feedback(feedback) if *link == 0 => Some(f64::from(feedback.yaw_rate) / 2048.0),
            FromDrivers::Feedback(_) | FromDrivers::Identity(_) => None,
        })
        .collect();
    let n = readings.len() as f64;
    let mean = readings.iter().sum::<f64>() / n;
    let spread = (readings.iter().map(|r| (r - mean) * (r - mean)).sum::<f64>() / n).sqrt();
    let settings = SimSettings::default();
    close(mean, 0.6 + settings.gyro_bias_rad_s, 5.0 * settings.gyro_noise_rad_s / n.sqrt() + 1e-4);
    close(spread, settings.gyro_noise_rad_s, 5.0 * settings.gyro_noise_rad_s / (2.0 * n).sqrt() + 1e-4);
}

#[test]
fn the_supply_sags_under_load() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    assert_eq!(host.feedback(0).supply_mv, 24_000);
    host.run_ms(500);
    assert!(host.feedback(0).supply_mv < 24_000);
    host.sim.fault(Fault::Link(Which::One(1), LinkFault::Supply { volts: 11.5 }));
    host.run_ms(50);
    assert!((11_000..11_500).contains(&host.feedback(1).supply_mv));
}

/// DESIGN 5, bit 9: what cannot be held scales all channels, never one.
#[test]
fn too_little_supply_scales_all_wheels_of_a_link_together_and_says_so() {
    let mut host = Host::running(1, ideal(), Twist::new(1.0, 0.6, 0.1));
    host.run_ms(300);
    assert_eq!(host.feedback(0).status & status::SCALED, 0);
    let before = host.sim.truth().wheel_rad_s;
    host.sim.fault(Fault::Link(Which::One(0), LinkFault::Supply { volts: 8.0 }));
    host.run_ms(300);
    assert_ne!(host.feedback(0).status & status::SCALED, 0);
    assert_eq!(host.feedback(1).status & status::SCALED, 0);
    let after = host.sim.truth().wheel_rad_s;
    let share = after[0] / before[0];
    assert!(share < 0.95, "{share}");
    close(after[1] / before[1], share, 1e-9);
    close(after[2], before[2], 1e-9);
}

mod faults;
