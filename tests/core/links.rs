//! Links: who is there, what is sent when, what the wheels' numbers mean.

use gripline::core::event::{IdentityField, Wait};
use gripline::core::io::Buttons;
use gripline::core::settings::longest_ramp_ms;
use gripline::core::{Event, Phase, words};
use gripline::wire::{Identity, Mode, ToDrivers};

use crate::world::{World, four_mecanum, four_omni, patient_drivers};

fn drives(world: &World, link: u8) -> usize {
    let of_link = world.out.frames.iter().filter(|it| it.link == link);
    of_link.filter(|it| matches!(it.message, ToDrivers::Drive(_))).count()
}

#[test]
fn a_link_is_asked_until_it_tells_who_it_is_and_not_driven_before() {
    let mut world = World::new(four_mecanum());
    world.boards[0].deaf = true;
    let mut asked = 0;
    for _ in 0..200 {
        world.tick();
        asked += world.out.frames.iter().filter(|it| it.message == ToDrivers::Ask).count();
        assert_eq!(drives(&world, 0), 0);
    }
    assert_eq!(asked, 10, "ten times a second");
    assert_eq!(world.out.view.waits_for, Some(Wait::NoIdentity { link: 0 }));
    world.boards[0].deaf = false;
    world.run_s(0.2);
    assert!(world.told(|it| matches!(it, Event::LinkAnswers { link: 0 })));
    assert_eq!(world.out.view.waits_for, None);
    for _ in 0..100 {
        world.tick();
        assert!(world.out.frames.iter().all(|it| it.message != ToDrivers::Ask));
    }
}

#[test]
fn every_difference_of_an_identity_keeps_parked_and_names_both_values() {
    type Change = fn(&mut Identity);
    let cases: [(Change, IdentityField, [&str; 2]); 7] = [
        (|it| it.version = 2, IdentityField::Version(2), ["version 2", "1"]),
        (
            |it| it.name = "other".parse().unwrap(),
            IdentityField::Name("other".parse().unwrap()),
            ["\"other\"", "\"tray cart drivers\""],
        ),
        (|it| it.channels = 6, IdentityField::Channels(6), ["6", "4"]),
        (|it| it.speed_lsb_urad_s = 999, IdentityField::SpeedLsb(999), ["999", "1000"]),
        (|it| it.angle_lsb_urad = 501, IdentityField::AngleLsb(501), ["501", "500"]),
        (|it| it.silence_ms = 99, IdentityField::Silence(99), ["99", "100"]),
        (|it| it.ramp_max_ms = 200, IdentityField::RampMax(200), ["200", ""]),
    ];
    for (change, field, values) in cases {
        let mut world = World::new(four_mecanum());
        let mut identity = world.boards[0].identity.clone();
        change(&mut identity);
        for tick in 0..100 {
            let mut inputs = world.see();
            inputs.links[0].identity = (tick == 10).then(|| identity.clone());
            world.step(inputs);
        }
        let wait = Wait::IdentityDiffers { link: 0, field };
        assert_eq!(world.out.view.waits_for, Some(wait));
        let line = words::wait(&wait, &world.plan);
        assert!(values.iter().all(|it| line.contains(it)), "{line}");
        world.tap(Buttons::READY);
        assert_eq!(world.phase(), Phase::Parked);
        assert_eq!(drives(&world, 0), 0, "what is not as planned is not driven");
    }
    // What is enough is enough.
    let mut world = World::new(four_mecanum());
    world.boards[0].identity.silence_ms = 100;
    world.boards[0].identity.ramp_max_ms = longest_ramp_ms(&world.plan);
    let identity = world.boards[0].identity.clone();
    for tick in 0..20 {
        let mut inputs = world.see();
        inputs.links[0].identity = (tick == 10).then(|| identity.clone());
        world.step(inputs);
    }
    assert_eq!(world.out.view.waits_for, None);
}

#[test]
fn a_plan_with_a_gyro_wants_drivers_with_one() {
    let mut world = World::new(four_omni());
    for tick in 0..20 {
        let mut inputs = world.see();
        for (link, board) in inputs.links.iter_mut().zip(&world.boards) {
            link.identity = (tick == 5).then(|| Identity { flags: 0, ..board.identity.clone() });
        }
        world.step(inputs);
    }
    let wait = Wait::IdentityDiffers { link: 0, field: IdentityField::YawRate };
    assert_eq!(world.out.view.waits_for, Some(wait));
}

#[test]
fn frames_carry_the_ramp_of_the_present_speed() {
    let world = World::new(four_mecanum()).at_speed(1.0, 0.0, 0.0);
    // 0.25 m/s at 1.5 m/s^2; the wheels, 5 rad/s at 120 rad/s^2, would need less.
    assert_eq!(world.out.stop_ramp_ms, 167);
    let ramps = world.out.frames.iter().filter_map(|it| match &it.message {
        ToDrivers::Drive(drive) => Some((drive.mode, drive.ramp_ms)),
        ToDrivers::Ask | ToDrivers::Stop { .. } | ToDrivers::Clear { .. } => None,
    });
    assert_eq!(ramps.collect::<Vec<_>>(), [(Mode::Run, 167)]);
    let turning = World::new(four_mecanum()).at_speed(0.0, 0.0, 1.0);
    // 0.6 rad/s at 4 rad/s^2.
    assert_eq!(turning.out.stop_ramp_ms, 150);
    let standing = World::new(four_mecanum()).into_ready();
    assert_eq!(standing.out.stop_ramp_ms, 1, "0 would take the torque off at once");
}

#[test]
fn sequences_go_on_by_one_a_frame_and_stops_fit_in() {
    let mut world = World::new(four_mecanum()).at_speed(1.0, 0.0, 0.0);
    let mut next = world.out.stop_sequence[0];
    for tick in 0..700 {
        if tick == 300 {
            world.console.stop = true;
        }
        world.tick();
        if world.out.pull_stop {
            assert_eq!(world.out.stop_sequence[0], next);
            next = next.wrapping_add(1);
        }
        for frame in &world.out.frames {
            assert_eq!(frame.sequence, next);
            next = next.wrapping_add(1);
        }
        if !world.out.pull_stop {
            assert_eq!(world.out.stop_sequence[0], next, "a stop pulled outside goes on from here");
        }
    }
    assert_eq!(world.phase(), Phase::Tripped);
}

#[test]
fn nothing_is_sent_while_more_than_one_frame_is_unsent() {
    let mut world = World::new(patient_drivers()).into_ready();
    for (unsent, sends) in [(0, 1), (1, 1), (2, 0), (9, 0)] {
        world.boards[0].unsent = Some(unsent);
        world.tick();
        assert_eq!(drives(&world, 0), sends, "{unsent} unsent");
    }
    assert_eq!(world.events.iter().filter(|it| matches!(it, Event::SendSkipped { .. })).count(), 1);
    // They don't pile up, and are not taken for heard either.
    world.until(0.2, "not heard", |it| it.phase() == Phase::Tripped);
    assert_eq!(world.cause(), "not-heard");
}

#[test]
fn without_a_count_unacknowledged_frames_hold_sending_back_but_never_starve_the_link() {
    let mut world = World::new(patient_drivers());
    world.boards[0].unsent = None;
    let mut world = world.into_ready();
    for _ in 0..100 {
        world.tick();
        assert_eq!(drives(&world, 0), 1, "a link that answers gets one a tick");
    }
    world.boards[0].deaf = true;
    let mut sent_at = Vec::new();
    while world.phase() == Phase::Ready {
        world.tick();
        if drives(&world, 0) > 0 {
            sent_at.push(world.now_us);
        }
    }
    assert_eq!(world.cause(), "not-heard");
    // 20 ms of delay are 4 frames in flight, one more may wait; then one every 20 ms.
    let gaps: Vec<u64> = sent_at.windows(2).map(|it| it[1] - it[0]).collect();
    assert!(gaps.iter().all(|it| *it <= 20_000), "{gaps:?}");
    assert!(gaps.iter().filter(|it| **it == 20_000).count() >= 3, "{gaps:?}");
}

#[test]
fn round_trips_and_ages_are_shown() {
    let world = World::new(four_mecanum()).into_ready();
    assert!(world.out.view.round_trip_s[0] > 0.0 && world.out.view.round_trip_s[0] <= 0.005);
    assert!(world.out.view.feedback_age_s[0] <= 0.005);
    let mut world = World::new(four_mecanum());
    world.boards[0].mute = true;
    world.tick();
    assert!(world.out.view.feedback_age_s[0].is_infinite());
}

#[test]
fn angles_wrap_without_a_jump_and_start_anew_with_the_drivers() {
    let mut world = World::new(four_mecanum());
    for channel in 0..4 {
        let near_end =
            if channel % 2 == 0 { f64::from(i32::MAX) - 500.0 } else { f64::from(i32::MIN) + 500.0 };
        world.boards[0].set_angle(channel, near_end);
    }
    let mut world = world.at_speed(1.0, 0.0, 0.0);
    let driven = world.out.view.pose.x_m;
    assert!(driven > 0.25 && driven < 0.4, "{driven}");
    assert!(world.out.view.pose.y_m.abs() < 1e-3);
    let now_us = world.now_us;
    let before = world.out.view.pose;
    world.boards[0].restart(now_us);
    world.run_s(0.5);
    let moved = world.out.view.pose.x_m - before.x_m;
    assert!(moved.abs() < 0.15, "{moved}: angles of the new start say nothing about the old");
}

#[test]
fn a_link_that_comes_back_is_stopped_and_cleared_only_by_a_reset() {
    let mut world = World::new(four_omni()).at_speed(1.0, 0.0, 0.0);
    world.boards[1].open = false;
    world.tick();
    assert_eq!((world.phase(), world.cause()), (Phase::Tripped, "write-fails"));
    world.hold(0.0);
    world.sticks(0.0, 0.0, 0.0);
    world.run_s(1.0);
    assert!(world.boards[0].driver.latched(), "a stop on one is a stop on all");
    assert_eq!(world.out.view.waits_for, Some(Wait::LinkNotOpen { link: 1 }));
    world.boards[1].open = true;
    world.boards[1].openings += 1;
    world.run_s(0.5);
    assert_eq!(world.phase(), Phase::Tripped);
    assert!(world.boards[1].driver.latched());
    world.reset();
    assert_eq!(world.phase(), Phase::Parked);
    world.run_s(0.5);
    assert_eq!(world.out.view.waits_for, None);
}

#[test]
fn heading_comes_from_the_gyro_less_its_bias_and_from_the_wheels_without_it() {
    let mut world = World::new(four_omni());
    // A bias of 41 counts, 0.02 rad/s.
    world.boards.iter_mut().for_each(|it| it.yaw_rate = Some(41));
    let mut world = world.into_parked();
    assert!(world.told(|it| *it == Event::HeadingFromGyro(true)));
    world.run_s(3.0);
    assert!(world.out.view.pose.heading_rad.abs() < 1e-6, "standing");
    world.tap(Buttons::READY);
    world.ticks(3);
    world.hold(1.0);
    world.tick();
    world.sticks(1.0, 0.0, 0.0);
    world.run_s(0.5);
    // The wheels go straight; the gyro says 0.5 rad/s above its bias.
    let from = world.out.view.pose.heading_rad;
    world.boards.iter_mut().for_each(|it| it.yaw_rate = Some(41 + 1024));
    world.run_s(1.0);
    let turned = world.out.view.pose.heading_rad - from;
    assert!((turned - 0.5).abs() < 0.01, "{turned}");
    // The yaw rate goes invalid: the wheels tell again, and it is said.
    world.boards.iter_mut().for_each(|it| it.yaw_rate = None);
    world.run_s(0.1);
    assert!(world.told(|it| *it == Event::HeadingFromGyro(false)));
    let from = world.out.view.pose.heading_rad;
    world.run_s(1.0);
    assert!((world.out.view.pose.heading_rad - from).abs() < 0.01);
    assert_eq!(world.phase(), Phase::Driving);
}
