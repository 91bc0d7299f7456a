//! Each guard on its threshold (DESIGN 4): not below, and within one tick above.

use gripline::core::cause::{Cause, DriverTrouble, StopBy};
use gripline::core::io::{Buttons, Puller};
use gripline::core::{Event, Phase};
use gripline::units::Mono;
use gripline::wire::status;

use crate::world::{World, four_mecanum, mecanum_with, patient_drivers};

const MOVING: [Phase; 2] = [Phase::Driving, Phase::Stopping];
const UNTRIPPED: [Phase; 4] = [Phase::Parked, Phase::Ready, Phase::Driving, Phase::Stopping];

fn assert_tripped(world: &World, cause: &str, category: u8) {
    assert_eq!((world.phase(), world.cause()), (Phase::Tripped, cause));
    assert!(world.out.pull_stop, "{cause}: the stop line is pulled");
    assert_eq!(u8::from(world.out.stop_ramp_ms > 0), category, "{cause}: category");
}

/// Ticks until tripped; how long it took since `since_s`, which must lie within one tick above `limit_s`.
fn trips_after(world: &mut World, since_s: f64, limit_s: f64, cause: &str, category: u8) {
    world.until(limit_s + 1.0, cause, |it| it.phase() == Phase::Tripped);
    assert_tripped(world, cause, category);
    let took = world.now_s() - since_s;
    let tick = world.period_s();
    assert!(took >= limit_s - 1e-9 && took <= limit_s + tick + 1e-9, "{cause}: {took} s, limit {limit_s} s");
}

#[test]
fn release_ramps_without_a_latch_and_ends_in_ready() {
    let mut world = World::new(four_mecanum()).at_speed(1.0, 0.0, 0.0);
    world.hold(0.39);
    world.tick();
    assert_eq!(world.phase(), Phase::Stopping);
    world.until(2.0, "standstill", |it| it.phase() != Phase::Stopping);
    assert_eq!(world.phase(), Phase::Ready);
    assert!(!world.told(|it| matches!(it, Event::Trip(_))));
    assert!(world.boards.iter().all(|it| !it.driver.latched()));
}

#[test]
fn a_trigger_between_its_thresholds_neither_presses_nor_releases() {
    let mut world = World::new(four_mecanum()).into_ready();
    world.hold(0.59);
    world.tick();
    assert_eq!(world.phase(), Phase::Ready);
    world.hold(0.60);
    world.tick();
    assert_eq!(world.phase(), Phase::Driving);
    world.hold(0.40);
    world.tick();
    assert_eq!(world.phase(), Phase::Driving);
    world.pad.hold_least = 0.39;
    world.tick();
    assert_eq!(world.phase(), Phase::Stopping, "a release between two ticks is not lost");
    // Nor one after which it is pressed home again: that press is spent.
    let mut world = World::new(four_mecanum()).at_speed(1.0, 0.0, 0.0);
    world.pad.hold_least = 0.0;
    world.tick();
    assert_eq!(world.phase(), Phase::Stopping);
    world.sticks(0.0, 0.0, 0.0);
    world.run_s(2.0);
    assert_eq!(world.phase(), Phase::Ready);
}

#[test]
fn stop_button_trips_at_once_from_every_phase() {
    for phase in UNTRIPPED {
        let mut world = World::in_phase(four_mecanum(), phase);
        world.press(Buttons::STOP);
        world.let_go(Buttons::STOP);
        world.tick();
        assert_tripped(&world, "stop-pad", 1);
        assert_eq!(world.out.cause, Some(Cause::StopAsked(StopBy::PadButton)));
    }
}

#[test]
fn a_stop_asked_takes_the_torque_off_at_once_where_the_key_says_so() {
    for phase in UNTRIPPED {
        let mut world = World::in_phase(mecanum_with("[guard]\nstop_category = 0"), phase);
        world.press(Buttons::STOP);
        world.tick();
        assert_tripped(&world, "stop-pad", 0);
        world.ticks(2);
        assert!(world.boards.iter().all(|it| !it.driver.command(world.now_us).torque));
    }
}

#[test]
fn squeezing_the_hold_control_through_is_a_stop_and_coming_back_no_press() {
    let plan = mecanum_with("[pad]\nhold_on = 0.3\nhold_off = 0.2\nhold_squeeze = 0.8");
    let mut world = World::new(plan).into_ready();
    world.hold(0.5);
    world.tick();
    assert_eq!(world.phase(), Phase::Driving);
    world.sticks(1.0, 0.0, 0.0);
    world.run_s(1.0);
    world.hold(0.79);
    world.tick();
    assert_eq!(world.phase(), Phase::Driving);
    world.hold(0.8);
    world.tick();
    assert_tripped(&world, "stop-squeeze", 1);
    world.hold(0.5);
    world.sticks(0.0, 0.0, 0.0);
    world.run_s(1.0);
    world.reset();
    assert_eq!(world.phase(), Phase::Tripped, "refused while hold is at run");
    world.hold(0.0);
    world.reset();
    assert_eq!(world.phase(), Phase::Parked);
}

#[test]
fn console_and_drivers_stop_input_stop_at_once() {
    for phase in UNTRIPPED {
        let mut world = World::in_phase(four_mecanum(), phase);
        world.console.stop = true;
        world.tick();
        assert_tripped(&world, "stop-console", 1);

        let mut world = World::in_phase(four_mecanum(), phase);
        world.boards[0].stop_input_open = true;
        world.until(0.03, "stop input", |it| it.phase() == Phase::Tripped);
        assert_tripped(&world, "stop-input", 1);
    }
}

#[test]
fn pad_gone_trips_at_once_from_every_phase() {
    for phase in UNTRIPPED {
        let mut world = World::in_phase(four_mecanum(), phase);
        world.pad.present = false;
        world.tick();
        assert_tripped(&world, "pad-gone", 1);
    }
}

#[test]
fn a_quiet_pad_stops_as_a_release_does_after_its_limit() {
    for (streams, wired, limit_s) in
        [(true, false, 0.2), (false, false, 2.0), (true, true, 0.2), (false, true, f64::INFINITY)]
    {
        let mut world = World::new(mecanum_with(&format!("[pad]\nwired = {wired}"))).at_speed(1.0, 0.0, 0.0);
        world.pad.streams = streams;
        world.tick();
        let since = world.now_s();
        world.pad_silent = true;
        if limit_s.is_infinite() {
            world.run_s(5.0);
            assert_eq!(world.phase(), Phase::Driving);
            continue;
        }
        world.until(3.0, "quiet", |it| it.phase() != Phase::Driving);
        let took = world.now_s() - since;
        assert!(took > limit_s && took <= limit_s + world.period_s() + 1e-9, "{took}");
        assert_eq!(world.phase(), Phase::Stopping);
        assert!(world.told(|it| matches!(it, Event::PadQuiet { .. })));
        world.until(2.0, "standstill", |it| it.phase() != Phase::Stopping);
        assert_eq!(world.phase(), Phase::Ready, "unlatched");
        world.pad_silent = false;
        world.run_s(0.2);
        assert_eq!(world.phase(), Phase::Ready, "still held: only a new press moves again");
    }
}

#[test]
fn feedback_quiet_trips_after_its_limit() {
    for phase in UNTRIPPED {
        let mut world = World::in_phase(four_mecanum(), phase);
        world.boards[0].mute = true;
        let heard_at = world.inputs.links[0].feedback.as_ref().map_or(0, |it| it.at.ns());
        assert!(heard_at > 0);
        trips_after(&mut world, Mono::from_ns(heard_at).ns() as f64 * 1e-9, 0.1, "feedback-quiet", 1);
    }
}

#[test]
fn not_heard_trips_after_its_limit() {
    for phase in UNTRIPPED {
        let mut world = World::in_phase(patient_drivers(), phase);
        // The frame of the last tick has been taken.
        let sent_s = world.now_s();
        world.boards[0].deaf = true;
        trips_after(&mut world, sent_s, 0.1, "not-heard", 1);
    }
}

#[test]
fn a_port_that_is_gone_trips_at_once_and_one_that_blocks_after_a_tick() {
    for phase in UNTRIPPED {
        let mut world = World::in_phase(four_mecanum(), phase);
        world.boards[0].open = false;
        world.tick();
        assert_tripped(&world, "write-fails", 1);

        let mut world = World::in_phase(four_mecanum(), phase);
        world.boards[0].write_blocked = true;
        world.tick();
        assert_eq!(world.phase(), phase, "one frame may wait for a tick");
        world.tick();
        assert_tripped(&world, "write-fails", 1);
    }
}

#[test]
fn a_late_tick_trips_above_its_limit_also_after_a_suspension() {
    for phase in UNTRIPPED {
        let mut world = World::in_phase(patient_drivers(), phase);
        world.late_us = 50_000;
        world.tick();
        assert_eq!(world.phase(), phase, "on the limit");
        world.late_us = 50_001;
        world.tick();
        assert_tripped(&world, "late-tick", 1);

        let mut world = World::in_phase(patient_drivers(), phase);
        world.let_pass(50_000);
        world.tick();
        assert_ne!(world.phase(), Phase::Tripped, "due again on the grid, and on the limit");
        let mut world = World::in_phase(patient_drivers(), phase);
        world.let_pass(50_250);
        world.tick();
        assert_tripped(&world, "late-tick", 1);
    }
}

#[test]
fn the_stop_line_pulled_outside_trips_with_the_cause_of_the_puller() {
    for phase in UNTRIPPED {
        for (by, cause) in [
            (Puller::PadStop, "stop-pad"),
            (Puller::PadGone, "pad-gone"),
            (Puller::Console, "stop-console"),
            (Puller::Sentinel, "no-tick"),
            (Puller::Panic, "panic"),
            (Puller::SecondSignal, "second-signal"),
            (Puller::LinkGone, "write-fails"),
        ] {
            let mut world = World::in_phase(four_mecanum(), phase);
            world.pull(by);
            world.tick();
            assert_tripped(&world, cause, 1);
            assert!(world.told(|it| matches!(it, Event::StopLinePulled(pull) if pull.by == by)));
        }
    }
}

#[test]
fn what_a_driver_says_trips_at_once() {
    for phase in UNTRIPPED {
        for bit in [status::OVER_CURRENT, status::OVER_TEMPERATURE, status::UNDER_VOLTAGE, status::ENCODER] {
            let mut world = World::in_phase(four_mecanum(), phase);
            world.boards[0].bits = bit;
            world.until(0.03, "fault", |it| it.phase() == Phase::Tripped);
            assert_tripped(&world, "driver-says", 1);
            let Some(Cause::DriverSays { what: DriverTrouble::Fault { status }, .. }) = world.out.cause
            else {
                panic!("{:?}", world.out.cause)
            };
            assert_eq!(status & status::FAULTS, bit);
        }
        let trouble = |world: &World| match world.out.cause {
            Some(Cause::DriverSays { what, .. }) => what,
            _ => panic!("{:?}", world.out.cause),
        };
        // A stop from elsewhere, as another program on the port would send.
        let mut world = World::in_phase(four_mecanum(), phase);
        let stop = gripline::wire::ToDrivers::Stop { ramp_ms: 100 };
        let mut bytes = [0; gripline::wire::MAX_ON_LINE];
        let n = gripline::wire::emit_to_drivers(99, &stop, &mut bytes);
        for byte in &bytes[..n] {
            let now_us = world.now_us;
            world.boards[0].driver.receive(*byte, now_us);
        }
        world.until(0.03, "latch", |it| it.phase() == Phase::Tripped);
        assert_tripped(&world, "driver-says", 1);
        assert!(matches!(trouble(&world), DriverTrouble::LatchNotOurs { .. }));

        let mut world = World::in_phase(four_mecanum(), phase);
        let now_us = world.now_us;
        world.boards[0].restart(now_us);
        world.until(0.03, "restart", |it| it.phase() == Phase::Tripped);
        assert_tripped(&world, "driver-says", 1);
        assert_eq!(trouble(&world), DriverTrouble::Restarted);
    }
}

#[test]
fn a_clock_that_falls_is_a_restart_and_one_that_wraps_is_not() {
    // Falling from anywhere to near zero, also by more than half of the clock's range.
    for up_us in [10_000_000, 2_000_000_000, 3_000_000_000, 4_200_000_000] {
        let mut world = World::new(four_mecanum());
        world.boards[0].clock_ahead_us = up_us;
        let mut world = world.into_ready();
        let mut inputs = world.see();
        let feedback = &mut inputs.links[0].feedback.as_mut().unwrap().feedback;
        feedback.clock_us = 5_000;
        world.step(inputs);
        assert_tripped(&world, "driver-says", 1);
    }
    let mut world = World::new(four_mecanum());
    world.boards[0].clock_ahead_us = (1 << 32) - 3_000_000;
    let mut world = world.into_ready();
    let before = world.inputs.links[0].feedback.as_ref().unwrap().feedback.clock_us;
    world.run_s(4.0);
    let after = world.inputs.links[0].feedback.as_ref().unwrap().feedback.clock_us;
    assert!(after < before, "it has wrapped");
    assert_eq!(world.phase(), Phase::Ready);
}

#[test]
fn an_identity_that_changes_trips() {
    let mut world = World::new(four_mecanum()).into_ready();
    let mut inputs = world.see();
    let mut identity = world.boards[0].identity.clone();
    identity.silence_ms += 1;
    inputs.links[0].identity = Some(identity);
    world.step(inputs);
    assert_tripped(&world, "driver-says", 1);
}

/// Full speed of a wheel of the tray cart in counts.
const FULL_COUNTS: f64 = 30_000.0;

#[test]
fn not_following_trips_after_half_a_second_above_a_tenth_of_full_speed() {
    for phase in MOVING {
        for channel in 0..4 {
            let mut world = World::in_phase(four_mecanum(), phase);
            world.boards[0].report_offset[channel] = FULL_COUNTS * 0.099;
            if phase == Phase::Driving {
                world.run_s(3.0);
                assert_eq!(world.phase(), Phase::Driving, "below its share");
                world.boards[0].report_offset[channel] = FULL_COUNTS * 0.101;
                world.tick();
                let since = world.now_s();
                trips_after(&mut world, since, 0.5, "not-following", 1);
                let Some(Cause::NotFollowing { wheel, .. }) = world.out.cause else { panic!() };
                assert_eq!(usize::from(wheel), channel);
            }
        }
    }
    // Not long enough.
    let mut world = World::new(four_mecanum()).at_speed(0.0, 1.0, 0.0);
    world.boards[0].report_offset[2] = FULL_COUNTS * 0.2;
    world.run_s(0.49);
    world.boards[0].report_offset[2] = 0.0;
    world.run_s(0.5);
    assert_eq!(world.phase(), Phase::Driving);
}

#[test]
fn sound_wheels_that_lag_follow_through_every_ramp() {
    // Shares and times so small that only the allowance for the lag explains the way behind a ramp.
    let mut world = World::new(mecanum_with("[guard]\nfollow_share = 0.02\nfollow_s = 0.3"));
    world.boards[0].lag_s = 0.08;
    let mut world = world.into_driving();
    world.press(Buttons::PACE_UP);
    world.let_go(Buttons::PACE_UP);
    for (x, y, turn) in
        [(1.0, 0.0, 0.0), (-1.0, 1.0, 0.0), (0.0, 0.0, 1.0), (0.7, -0.7, -1.0), (0.0, 0.0, 0.0)]
    {
        world.sticks(x, y, turn);
        world.run_s(1.3);
        assert_eq!(world.phase(), Phase::Driving, "{:?}", world.out.cause);
    }
}

#[test]
fn a_wheel_that_does_not_slow_down_loses_its_torque() {
    let mut world = World::new(four_mecanum()).into_driving();
    world.tap(Buttons::PACE_UP);
    world.sticks(1.0, 0.0, 0.0);
    world.run_s(2.0);
    let speed = world.boards[0].speed_counts(3);
    assert!(speed.abs() > 10_000.0);
    world.boards[0].stuck[3] = Some(speed);
    world.console.stop = true;
    world.tick();
    let since = world.now_s();
    assert_tripped(&world, "stop-console", 1);
    assert!(world.out.stop_ramp_ms > 300);
    world.until(0.5, "not slowing", |it| it.out.stop_ramp_ms == 0);
    // slowing_s, and the delay that is assumed of the drivers.
    let took = world.now_s() - since;
    assert!(took >= 0.22 - 1e-9 && took <= 0.22 + world.period_s() + 1e-9, "{took}");
    assert_eq!(world.cause(), "stop-console", "the first cause stays");
    assert!(world.told(|it| matches!(it, Event::Trip(Cause::NotSlowing { wheel: 3, .. }))));
    assert!(world.out.pull_stop, "the drivers are told at once");
    assert!(!world.boards[0].driver.command(world.now_us).torque);
}

#[test]
fn wheels_that_slow_down_with_a_lag_are_not_taken_for_stuck() {
    let mut world = World::new(four_mecanum());
    world.boards[0].lag_s = 0.08;
    let mut world = world.into_driving();
    world.tap(Buttons::PACE_UP);
    world.sticks(1.0, 0.0, 0.5);
    world.run_s(2.0);
    world.console.stop = true;
    world.run_s(1.0);
    assert!(world.tape.iter().all(|(_, out)| out.stop_ramp_ms > 0));
}

#[test]
fn a_line_gone_quiet_is_not_taken_for_wheels_that_do_not_slow_down() {
    let mut world = World::new(patient_drivers()).into_driving();
    world.tap(Buttons::PACE_UP);
    world.sticks(1.0, 0.0, 0.0);
    world.run_s(2.0);
    world.boards[0].mute = true;
    world.run_s(1.0);
    assert_eq!(world.cause(), "feedback-quiet");
    assert!(!world.told(|it| matches!(it, Event::Trip(Cause::NotSlowing { .. }))));
    assert!(world.out.stop_ramp_ms > 300, "the drivers ramp");
}

#[test]
fn runaway_takes_the_torque_off_once_a_wheel_goes_on_turning() {
    let mut world = World::new(four_mecanum()).into_ready();
    world.run_s(1.0);
    world.boards[0].stuck[1] = Some(FULL_COUNTS * 0.049);
    world.run_s(3.0);
    assert_eq!(world.phase(), Phase::Ready, "below its share");
    world.boards[0].stuck[1] = Some(FULL_COUNTS * 0.051);
    // Feedback tells of the beginning of a tick.
    world.tick();
    let since = world.now_s();
    // 0.1 rad at 1.53 rad/s.
    trips_after(&mut world, since, 0.1 / (30.0 * 0.051), "runaway", 0);
    let Some(Cause::Runaway { wheel: 1, .. }) = world.out.cause else { panic!("{:?}", world.out.cause) };
    world.ticks(2);
    assert!(!world.boards[0].driver.command(world.now_us).torque);
}

#[test]
fn runaway_waits_until_the_command_has_been_zero_for_long_enough() {
    let mut world = World::new(four_mecanum()).into_ready();
    // Fresh in Ready: 3 ticks. The wheel turns from the start.
    world.boards[0].stuck[0] = Some(-FULL_COUNTS * 0.2);
    let ready_since = world.now_s() - 3.0 * world.period_s();
    // 0.3 s after the lag (0.02 s of the drivers, 0.08 s of the wheels), then 0.1 rad at 6 rad/s.
    world.until(1.0, "runaway", |it| it.phase() == Phase::Tripped);
    assert_tripped(&world, "runaway", 0);
    let took = world.now_s() - ready_since;
    let limit = 0.4 + 0.1 / 6.0;
    assert!(took >= limit && took <= limit + 2.0 * world.period_s(), "{took}");
}

#[test]
fn a_base_pushed_without_torque_is_only_told_of() {
    for phase in [Phase::Parked, Phase::Tripped] {
        let mut world = World::in_phase(four_mecanum(), phase);
        world.events.clear();
        let cause = world.out.cause;
        world.boards[0].stuck = vec![Some(9_000.0), Some(-9_000.0), Some(9_000.0), Some(-9_000.0)];
        world.run_s(2.0);
        assert_eq!((world.phase(), world.out.cause), (phase, cause));
        assert_eq!(world.events.iter().filter(|it| matches!(it, Event::Pushed { .. })).count(), 1);
        assert!(!world.told(|it| matches!(it, Event::Trip(_))));
    }
}

/// Wheel speeds that no motion of four mecanum wheels makes: their left null space is (1, 1, -1, -1) in this order, in
/// counts (1, -1, -1, 1), since the right wheels are mounted mirrored.
fn skid(world: &mut World, share: f64) {
    world.boards[0].report_offset = [1.0, -1.0, -1.0, 1.0].map(|it| it * share * FULL_COUNTS).to_vec();
}

#[test]
fn skid_is_told_at_once_and_trips_after_a_second() {
    // A wheel that skids by so much is also off its command: that guard stands aside here.
    let mut world = World::new(mecanum_with("[guard]\nfollow_share = 1.0")).at_speed(1.0, 0.0, 0.0);
    skid(&mut world, 0.099);
    world.run_s(3.0);
    assert!(!world.told(|it| matches!(it, Event::Skidding { .. })));
    skid(&mut world, 0.101);
    let told = |it: &World| it.told(|it| matches!(it, Event::Skidding { wheel: None, .. }));
    world.until(0.011, "told", told);
    let since = world.now_s();
    assert!((world.out.view.skid_rad_s - 3.03).abs() < 0.01);
    trips_after(&mut world, since, 1.0, "skid", 1);
}

#[test]
fn from_five_wheels_on_the_skidding_one_is_named() {
    let mut text = String::from("[base]\nname = \"ring\"\noutline_m = [0.6, 0.6]\n");
    for wheel in 0..6 {
        let angle = f64::from(wheel) * 60.0_f64.to_radians();
        text += &format!(
            "[[wheel]]\nname = \"w{wheel}\"\nat_m = [{:.5}, {:.5}]\ndrive_deg = {}.0\nroller_deg = 0.0\nradius_m = \
             0.05\nmax_rad_s = 30.0\nmax_rad_s2 = 120.0\nlink = \"l\"\nchannel = {wheel}\n",
            0.25 * angle.cos(),
            0.25 * angle.sin(),
            (90 + 60 * wheel) % 360
        );
    }
    text += "[[link]]\nname = \"l\"\nport = \"/dev/ttyUSB0\"\nbaud = 921600\nexpect = \"six\"\nchannels = \
             6\nspeed_lsb_urad_s = 1000\nangle_lsb_urad = 500\n[[pace]]\nname = \"p\"\ntravel_m_s = 0.4\nturn_rad_s = \
             0.6\n[guard]\nfollow_share = 1.0\n";
    for skidding in 0..6 {
        let mut world = World::new(crate::world::plan(&text)).at_speed(0.6, 0.3, 0.2);
        world.boards[0].report_offset[skidding] = 0.3 * FULL_COUNTS;
        world.until(1.1, "skid", |it| it.phase() == Phase::Tripped);
        let Some(Cause::Skid { wheel: Some(named), .. }) = world.out.cause else {
            panic!("{:?}", world.out.cause)
        };
        assert_eq!(usize::from(named), skidding);
    }
}

#[test]
fn three_wheels_never_skid() {
    let plan = crate::world::plan(&format!("{}\n[guard]\nfollow_share = 1.0", include_str!("lamp.toml")));
    let mut world = World::new(plan).at_speed(0.5, 0.0, 0.0);
    world.boards[0].report_offset = vec![20_000.0, -9_000.0, 15_000.0];
    world.run_s(3.0);
    assert_eq!(world.phase(), Phase::Driving);
    assert!(world.tape.iter().all(|(_, out)| out.view.skid_rad_s < 1e-9));
}

#[test]
fn a_stop_without_standstill_trips_after_its_ramp_and_margin() {
    let mut world = World::new(four_mecanum()).at_speed(1.0, 0.0, 0.0);
    world.hold(0.0);
    world.sticks(0.0, 0.0, 0.0);
    world.tick();
    let since = world.now_s();
    // Too fast for a standstill, too slow for a runaway.
    world.boards[0].report_offset[0] = FULL_COUNTS * 0.03;
    // 0.25 m/s at 1.5 m/s^2, the average of 0.1 s, the margin of 0.5 s.
    let ramp_s = (0.25_f64 / (1.5 * 0.005)).ceil() * 0.005 + 0.1;
    trips_after(&mut world, since, ramp_s + 0.5, "stop-overdue", 1);
}

#[test]
fn standstill_is_two_percent_for_a_tenth_of_a_second() {
    for (share, reaches) in [(0.0199, true), (0.0201, false)] {
        let mut world = World::new(four_mecanum()).into_stopping();
        world.boards[0].report_offset[0] = FULL_COUNTS * share;
        world.run_s(0.7);
        assert_eq!(world.phase() == Phase::Ready, reaches, "{share}");
    }
}

#[test]
fn drivers_found_latched_trip_at_the_start() {
    let mut world = World::new(four_mecanum());
    let stop = gripline::wire::ToDrivers::Stop { ramp_ms: 1 };
    let mut bytes = [0; gripline::wire::MAX_ON_LINE];
    let n = gripline::wire::emit_to_drivers(0, &stop, &mut bytes);
    for byte in &bytes[..n] {
        world.boards[0].driver.receive(*byte, 0);
    }
    world.until(0.1, "found", |it| it.phase() == Phase::Tripped);
    assert_tripped(&world, "found-latched", 1);
    world.run_s(0.5);
    world.reset();
    assert_eq!(world.phase(), Phase::Parked);
}
