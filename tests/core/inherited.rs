//! A program that starts while the base still moves as another one told it: whatever it does must not take the torque
//! off a base at speed.

use gripline::core::settings::longest_ramp_ms;
use gripline::core::{Core, Outputs, Phase, words};
use gripline::wire::ToDrivers;

use crate::world::{World, patient_drivers};

/// The old program is dead, a new one starts.
fn start_anew(world: &mut World) {
    world.core = Core::new(&world.plan);
    world.out = Outputs::default();
    world.events.clear();
}

/// Ticks until the wheels stand. Their speed may never fall faster than the longest ramp allows.
fn falls_gently(world: &mut World) {
    let ramp_s = f64::from(longest_ramp_ms(&world.plan)) * 1e-3;
    let top = world.boards[0].speed_counts(0).abs();
    // One tick of a ramp for the pace that it drove at, and what the wheels lag behind.
    let most = 4.0 * top * world.period_s() / ramp_s.min(0.4);
    let mut before = top;
    for _ in 0..600 {
        world.tick();
        assert!(world.out.frames.iter().all(|it| !matches!(it.message, ToDrivers::Drive(_))));
        let now = world.boards[0].speed_counts(0).abs();
        assert!(before - now <= most, "from {before} to {now} in a tick, {most} allowed");
        before = now;
    }
    assert_eq!(world.phase(), Phase::Tripped);
    assert!(before < 0.02 * top, "{before} of {top}");
}

#[test]
fn a_ramp_that_goes_on_when_the_program_starts_is_not_cut_short() {
    let mut world = World::new(crate::world::four_mecanum()).at_speed(1.0, 0.0, 0.0);
    world.let_pass(150_000);
    assert!(world.boards[0].driver.latched());
    start_anew(&mut world);
    world.until(0.1, "the latch is found", |it| it.phase() == Phase::Tripped);
    assert_eq!(world.cause(), "found-latched");
    assert_eq!(world.out.stop_ramp_ms, longest_ramp_ms(&world.plan));
    falls_gently(&mut world);
}

#[test]
fn drivers_that_still_run_when_the_program_starts_are_stopped_by_a_ramp_and_never_parked_at_speed() {
    let mut world = World::new(patient_drivers()).at_speed(1.0, 0.0, 0.0);
    start_anew(&mut world);
    world.until(0.1, "the torque is found", |it| it.phase() == Phase::Tripped);
    let cause = world.out.cause.unwrap();
    assert!(words::cause(&cause, &world.plan).contains("found with torque on"), "{cause:?}");
    assert_eq!(world.out.stop_ramp_ms, longest_ramp_ms(&world.plan));
    falls_gently(&mut world);
}
