//! Hold, ready, reset, buttons, the orderly end: what people do.

use gripline::core::event::{Request, Wait};
use gripline::core::io::Buttons;
use gripline::core::{Cause, Event, Phase};
use gripline::shaping::Frame;
use gripline::wire::{Mode, ToDrivers};

use crate::world::{World, four_mecanum, four_omni, mecanum_with};

fn refused(world: &World, request: Request, wait: Wait) -> bool {
    world.told(|it| *it == Event::Refused { request, wait })
}

#[test]
fn a_whole_drive_goes_where_the_sticks_say() {
    let mut world = World::new(four_mecanum()).at_speed(1.0, 0.0, 0.0);
    let pose = world.out.view.pose;
    assert!(pose.x_m > 0.25 && pose.y_m.abs() < 1e-3 && pose.heading_rad.abs() < 1e-3, "{pose:?}");
    assert!((world.out.view.sent.x_m_s - 0.25).abs() < 1e-9);
    // Forward turns every wheel forward; the right side is mounted mirrored.
    let counts = &world.out.view.sent_counts;
    assert!(counts[0] > 0 && counts[1] < 0 && counts[2] > 0 && counts[3] < 0, "{counts:?}");
    assert!(world.out.view.measured_rad_s.iter().all(|it| (*it - 5.0).abs() < 0.1));
    world.hold(0.0);
    world.sticks(0.0, 0.0, 0.0);
    world.until(1.0, "Ready", |it| it.phase() == Phase::Ready);
    assert!(world.boards.iter().all(|it| !it.driver.latched()));
}

#[test]
fn a_press_off_centre_is_spent_until_released_and_pressed_again() {
    let mut world = World::new(four_mecanum()).into_ready();
    world.sticks(0.5, 0.0, 0.0);
    world.hold(1.0);
    world.tick();
    assert!(refused(&world, Request::Press, Wait::SticksNotCentred));
    world.sticks(0.0, 0.0, 0.0);
    world.run_s(1.0);
    assert_eq!(world.phase(), Phase::Ready);
    world.hold(0.0);
    world.tick();
    world.hold(1.0);
    world.tick();
    assert_eq!(world.phase(), Phase::Driving);
}

#[test]
fn a_press_in_stopping_is_spent() {
    let mut world = World::new(four_mecanum()).into_stopping();
    world.hold(1.0);
    world.tick();
    assert!(refused(&world, Request::Press, Wait::PressSpent));
    world.until(2.0, "standstill", |it| it.phase() == Phase::Ready);
    world.run_s(1.0);
    assert_eq!(world.phase(), Phase::Ready, "nothing moves while it stays pressed");
    world.hold(0.0);
    world.tick();
    world.hold(1.0);
    world.tick();
    assert_eq!(world.phase(), Phase::Driving);
}

#[test]
fn a_press_that_was_not_seen_released_in_ready_is_spent() {
    let mut world = World::new(four_mecanum()).into_stopping();
    world.hold(1.0);
    world.until(2.0, "standstill", |it| it.phase() == Phase::Ready);
    // Released and pressed again between two ticks: released was never seen in Ready.
    world.events.clear();
    world.pad.hold_least = 0.0;
    world.tick();
    assert_eq!(world.phase(), Phase::Ready);
    assert!(refused(&world, Request::Press, Wait::PressSpent));
}

#[test]
fn ready_is_refused_for_each_reason_and_never_remembered() {
    let refuse = |change: fn(&mut World), wait: Wait| {
        let mut world = World::new(four_mecanum()).into_parked();
        change(&mut world);
        world.tick();
        assert_eq!(world.out.view.waits_for, Some(wait));
        world.tap(Buttons::READY);
        assert_eq!(world.phase(), Phase::Parked);
        assert!(refused(&world, Request::Ready, wait), "{wait:?}");
        world.hold(0.0);
        world.sticks(0.0, 0.0, 0.0);
        world.quit = false;
        world.run_s(0.5);
        assert_eq!(world.phase(), Phase::Parked, "an edge is not remembered");
    };
    refuse(|it| it.hold(1.0), Wait::HoldNotReleased);
    refuse(|it| it.sticks(0.0, 0.3, 0.0), Wait::SticksNotCentred);
    refuse(|it| it.sticks(0.0, 0.0, -0.3), Wait::SticksNotCentred);
    refuse(|it| it.quit = true, Wait::Quitting);
    // Held from before: no edge.
    let mut world = World::new(four_mecanum());
    world.pad.down = Buttons::READY;
    let mut world = world.into_parked();
    world.run_s(0.5);
    assert_eq!(world.phase(), Phase::Parked);
}

#[test]
fn ready_left_alone_parks_and_one_that_is_touched_does_not() {
    let plan = || mecanum_with("[guard]\nready_idle_s = 1.0");
    let mut world = World::new(plan()).into_ready();
    world.run_s(0.97);
    assert_eq!(world.phase(), Phase::Ready);
    world.run_s(0.03);
    assert_eq!(world.phase(), Phase::Parked);
    let mut world = World::new(plan()).into_ready();
    for _ in 0..5 {
        world.run_s(0.9);
        world.tap(Buttons::PACE_UP);
    }
    assert_eq!(world.phase(), Phase::Ready);
    // A hold control that is stuck does not keep it awake.
    let mut world = World::new(plan()).into_ready();
    world.sticks(0.5, 0.0, 0.0);
    world.hold(1.0);
    world.run_s(1.01);
    assert_eq!(world.phase(), Phase::Parked);
}

#[test]
fn a_trip_is_left_by_release_reset_ready_press_in_that_order() {
    let mut world = World::new(four_mecanum()).at_speed(1.0, 0.0, 0.0);
    world.press(Buttons::STOP);
    world.tick();
    world.let_go(Buttons::STOP);
    world.sticks(0.0, 0.0, 0.0);
    world.run_s(1.0);
    // Hold is still down: reset is refused at once, ready too.
    world.events.clear();
    world.press(Buttons::RESET);
    world.tick();
    assert!(refused(&world, Request::Reset, Wait::HoldNotReleased));
    world.run_s(1.5);
    assert_eq!(world.phase(), Phase::Tripped);
    world.hold(0.0);
    world.run_s(1.5);
    assert_eq!(world.phase(), Phase::Tripped, "the reset that was refused is not remembered");
    world.let_go(Buttons::RESET);
    world.tap(Buttons::READY);
    assert!(refused(&world, Request::Ready, Wait::WrongPhase));
    world.reset();
    assert_eq!(world.phase(), Phase::Parked);
    assert!(world.stop_line.is_none(), "the stop line rests again");
    assert!(world.boards.iter().all(|it| !it.driver.latched()));
    world.hold(1.0);
    world.run_s(0.2);
    assert_eq!(world.phase(), Phase::Parked, "a press does not make Ready");
    world.hold(0.0);
    world.tap(Buttons::READY);
    assert_eq!(world.phase(), Phase::Ready);
    world.ticks(2);
    world.hold(1.0);
    world.tick();
    assert_eq!(world.phase(), Phase::Driving);
}

#[test]
fn reset_must_be_held_from_an_edge_in_tripped() {
    let mut world = World::new(four_mecanum()).into_ready();
    world.press(Buttons::RESET);
    world.tick();
    world.console.stop = true;
    world.run_s(3.0);
    assert_eq!(world.phase(), Phase::Tripped, "held since before the trip");
    world.let_go(Buttons::RESET);
    world.tick();
    world.press(Buttons::RESET);
    world.run_s(0.99);
    world.let_go(Buttons::RESET);
    world.run_s(1.0);
    assert_eq!(world.phase(), Phase::Tripped, "not held long enough");
    let since = world.now_s();
    world.press(Buttons::RESET);
    world.until(2.0, "reset", |it| it.phase() == Phase::Parked);
    assert!(world.now_s() - since >= 1.0 && world.now_s() - since < 1.1);
}

#[test]
fn reset_waits_until_the_cause_is_gone() {
    let mut world = World::new(four_mecanum()).into_ready();
    world.boards[0].stop_input_open = true;
    world.run_s(0.5);
    world.reset();
    assert!(refused(&world, Request::Reset, Wait::StopInputOpen { link: 0 }));
    assert_eq!(world.phase(), Phase::Tripped);
    world.boards[0].stop_input_open = false;
    world.run_s(0.1);
    world.reset();
    assert_eq!(world.phase(), Phase::Parked);

    let mut world = World::new(four_mecanum()).into_ready();
    world.pad.present = false;
    world.run_s(0.5);
    assert_eq!(world.out.view.waits_for, Some(Wait::NoPad));
    world.pad.present = true;
    world.reset();
    assert_eq!(world.phase(), Phase::Parked);
}

#[test]
fn a_stop_during_a_reset_wins_over_it() {
    for stop in [Buttons::STOP, Buttons::default()] {
        let mut world = World::new(four_mecanum()).into_tripped();
        world.boards[0].deaf_to_clear = true;
        world.press(Buttons::RESET);
        world.run_s(1.1);
        assert!(!world.out.pull_stop, "Clear is on its way");
        if stop == Buttons::default() {
            world.boards[0].stop_input_open = true;
            world.run_s(0.03);
            world.boards[0].stop_input_open = false;
        } else {
            world.tap(stop);
        }
        world.boards[0].deaf_to_clear = false;
        world.run_s(2.0);
        assert_eq!(world.phase(), Phase::Tripped);
        assert!(world.boards[0].driver.latched());
    }
}

#[test]
fn the_console_resets_what_it_may() {
    let mut world = World::new(four_mecanum()).into_tripped();
    world.console.reset = true;
    world.run_s(0.2);
    assert_eq!(world.phase(), Phase::Parked);

    type Stop = fn(&mut World);
    let at_pad: [Stop; 3] = [
        |it| it.tap(Buttons::STOP),
        |it| {
            it.boards[0].stop_input_open = true;
            it.run_s(0.1);
            it.boards[0].stop_input_open = false;
        },
        // Also where the pad's stop comes second.
        |it| {
            it.console.stop = true;
            it.run_s(0.1);
            it.tap(Buttons::STOP);
        },
    ];
    for stop in at_pad {
        let mut world = World::new(four_mecanum()).into_ready();
        stop(&mut world);
        world.run_s(0.5);
        world.console.reset = true;
        world.run_s(0.5);
        assert_eq!(world.phase(), Phase::Tripped);
        assert!(refused(&world, Request::Reset, Wait::ResetAtPad));
        world.reset();
        assert_eq!(world.phase(), Phase::Parked);
    }
}

#[test]
fn a_squeeze_while_tripped_also_wants_the_pad() {
    let plan = mecanum_with("[pad]\nhold_on = 0.3\nhold_off = 0.2\nhold_squeeze = 0.8");
    let mut world = World::new(plan).into_tripped();
    world.hold(0.9);
    world.tick();
    world.hold(0.0);
    world.tick();
    world.console.reset = true;
    world.run_s(0.5);
    assert_eq!(world.phase(), Phase::Tripped);
}

#[test]
fn a_reset_that_one_link_does_not_follow_stops_again_and_names_it() {
    let mut world = World::new(four_omni()).into_tripped();
    world.boards[1].deaf_to_clear = true;
    world.events.clear();
    world.press(Buttons::RESET);
    world.until(2.0, "not cleared", |it| it.told(|it| matches!(it, Event::Trip(_))));
    assert!(world.told(|it| *it == Event::Trip(Cause::NotCleared { link: 1 })));
    assert!(world.out.pull_stop);
    assert_eq!(world.cause(), "stop-console");
    world.let_go(Buttons::RESET);
    world.run_s(0.2);
    assert!(world.boards.iter().all(|it| it.driver.latched()), "also the one that had unlatched");
    world.boards[1].deaf_to_clear = false;
    world.reset();
    assert_eq!(world.phase(), Phase::Parked);
}

#[test]
fn tripped_repeats_the_stop_until_every_link_is_latched() {
    let mut world = World::new(four_omni()).at_speed(1.0, 0.0, 0.0);
    world.boards[1].deaf = true;
    world.console.stop = true;
    for _ in 0..15 {
        world.tick();
        assert!(world.out.pull_stop);
    }
    assert!(world.boards[0].driver.latched() && !world.boards[1].driver.latched());
    world.boards[1].deaf = false;
    world.ticks(6);
    assert!(world.boards[1].driver.latched());
    assert!(!world.out.pull_stop);
}

#[test]
fn the_orderly_end_stops_parks_and_says_so_from_every_phase() {
    for phase in [Phase::Parked, Phase::Ready, Phase::Driving, Phase::Stopping, Phase::Tripped] {
        let mut world = World::in_phase(four_mecanum(), phase);
        world.quit = true;
        world.until(2.0, "finished", |it| it.out.finished);
        let tripped = phase == Phase::Tripped;
        assert_eq!(world.phase(), if tripped { Phase::Tripped } else { Phase::Parked });
        assert_eq!(world.boards[0].driver.latched(), tripped);
        assert!(!world.boards[0].driver.command(world.now_us).torque);
        if !tripped {
            let parks = |it: &gripline::core::io::Outgoing| matches!(&it.message, ToDrivers::Drive(drive) if drive.mode == Mode::Park);
            assert!(world.out.frames.iter().any(parks));
        }
    }
}

#[test]
fn the_orderly_end_does_not_wait_for_ever_for_a_dead_link() {
    let mut world = World::new(four_mecanum()).at_speed(1.0, 0.0, 0.0);
    world.boards[0].mute = true;
    world.run_s(0.5);
    assert_eq!(world.phase(), Phase::Tripped);
    world.quit = true;
    world.until(1.1, "finished", |it| it.out.finished);
}

#[test]
fn pace_frame_and_heading_buttons_do_what_they_say() {
    let mut world = World::new(four_mecanum()).into_parked();
    world.tap(Buttons::PACE_UP);
    assert_eq!(world.out.view.pace, 1);
    world.events.clear();
    world.tap(Buttons::PACE_UP);
    assert_eq!(world.out.view.pace, 1, "the fastest");
    assert!(world.events.is_empty());
    world.tap(Buttons::FRAME);
    assert_eq!(world.out.view.frame, Frame::Room);
    assert!(world.told(|it| *it == Event::Frame(Frame::Room)));
    // Turn on the spot, then drive along the room's x: sideways for the base.
    world.tap(Buttons::READY);
    world.ticks(2);
    world.hold(1.0);
    world.tick();
    world.sticks(0.0, 0.0, 1.0);
    world.until(10.0, "a quarter turn", |it| it.out.view.pose.heading_rad > 1.4);
    world.sticks(0.0, 0.0, 0.0);
    world.run_s(1.0);
    let from = world.out.view.pose;
    world.sticks(1.0, 0.0, 0.0);
    world.run_s(2.0);
    let to = world.out.view.pose;
    assert!((to.y_m - from.y_m).abs() < 0.01 * (to.x_m - from.x_m), "{from:?} {to:?}");
    // Zero heading in motion: the motion goes on without a step, the room turns.
    let before = world.out.view.sent;
    world.tap(Buttons::ZERO_HEADING);
    let after = world.out.view.sent;
    assert!((before.x_m_s - after.x_m_s).abs() < 0.02 && (before.y_m_s - after.y_m_s).abs() < 0.02);
    assert!(world.out.view.pose.heading_rad.abs() < 0.05);
    // In Tripped the buttons do nothing.
    world.console.stop = true;
    world.tick();
    world.tap(Buttons::PACE_DOWN);
    world.tap(Buttons::FRAME);
    assert_eq!((world.out.view.pace, world.out.view.frame), (1, Frame::Room));
}

/// The stop was given its time for the frame in which it began; in the room's frame it can take longer.
#[test]
fn a_frame_asked_in_a_stop_comes_after_it() {
    let mut world = World::new(four_mecanum()).into_stopping();
    assert_eq!(world.out.view.frame, Frame::Base);
    world.tap(Buttons::FRAME);
    while world.phase() == Phase::Stopping {
        assert_eq!(world.out.view.frame, Frame::Base);
        world.tick();
    }
    assert_eq!((world.phase(), world.out.view.frame), (Phase::Ready, Frame::Room));
}

/// A change of frame waits until the motion is inside both frames' limits; a stop does not wait with it.
#[test]
fn a_frame_asked_before_a_stop_and_not_yet_taken_comes_after_it() {
    let mut world = World::new(four_mecanum()).at_speed(1.0, 0.0, 0.0);
    world.tap(Buttons::FRAME);
    assert_eq!(world.out.view.frame, Frame::Base);
    world.hold(0.0);
    world.tick();
    while world.phase() == Phase::Stopping {
        assert_eq!(world.out.view.frame, Frame::Base);
        world.tick();
    }
    assert_eq!((world.phase(), world.out.view.frame), (Phase::Ready, Frame::Room));
}
