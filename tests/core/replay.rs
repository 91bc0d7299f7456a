//! The same inputs give the same outputs, from the start and from a snapshot.

use gripline::core::io::Buttons;
use gripline::core::{Core, CoreState, Inputs, Outputs};

use crate::world::{World, four_mecanum, four_omni};

/// A drive with a bit of everything.
fn tape(plan: gripline::config::Plan) -> Vec<(Inputs, Outputs)> {
    let mut world = World::new(plan).into_parked();
    world.tap(Buttons::FRAME);
    let mut world = world.at_speed(0.8, 0.3, 0.6);
    world.tap(Buttons::PACE_UP);
    world.sticks(-0.4, 1.0, -0.7);
    world.run_s(1.0);
    world.tap(Buttons::ZERO_HEADING);
    world.tap(Buttons::FRAME);
    world.run_s(0.7);
    world.hold(0.0);
    world.sticks(0.0, 0.0, 0.0);
    world.run_s(1.0);
    world.hold(1.0);
    world.tick();
    world.sticks(1.0, 0.0, 0.2);
    world.run_s(0.5);
    world.boards[0].mute = true;
    world.run_s(0.3);
    world.boards[0].mute = false;
    world.hold(0.0);
    world.sticks(0.0, 0.0, 0.0);
    world.run_s(0.5);
    world.reset();
    world.tap(Buttons::READY);
    world.run_s(0.2);
    world.tape
}

#[test]
fn the_same_inputs_give_the_same_outputs() {
    for plan in [four_mecanum(), four_omni()] {
        let mut again = Core::new(&plan);
        for (tick, (inputs, outputs)) in tape(plan.clone()).iter().enumerate() {
            assert_eq!(again.step(inputs), *outputs, "tick {tick}");
        }
    }
}

#[test]
fn a_snapshot_goes_on_as_the_core_itself_would() {
    for plan in [four_mecanum(), four_omni()] {
        let tape = tape(plan.clone());
        let mut bytes = vec![0; 1 << 20];
        let mut core = Core::new(&plan);
        let mut resumed: Vec<Core> = Vec::new();
        for (tick, (inputs, outputs)) in tape.iter().enumerate() {
            if tick % 150 == 0 {
                let state = core.state();
                let used = postcard::to_slice(&state, &mut bytes).unwrap();
                let read: CoreState = postcard::from_bytes(used).unwrap();
                assert_eq!(read, state);
                resumed.push(Core::resume(&plan, read));
            }
            assert_eq!(core.step(inputs), *outputs);
            for (from, it) in resumed.iter_mut().enumerate() {
                assert_eq!(it.step(inputs), *outputs, "resumed at tick {} and now at {tick}", from * 150);
            }
        }
        assert!(resumed.len() > 5);
        assert!(resumed.iter().all(|it| it.state() == core.state()));
    }
}
