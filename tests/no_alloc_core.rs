//! A step allocates nothing and frees nothing, in no phase and no trip.

#![expect(clippy::unwrap_used, clippy::panic, reason = "tests: a surprise is a failure")]
#![expect(unsafe_code, reason = "a global allocator that counts cannot be written without")]

use std::alloc::{GlobalAlloc, Layout, System};
use std::cell::Cell;

use gripline::core::io::{Buttons, Puller};
use gripline::core::{Core, Phase};

#[path = "core/world.rs"]
#[expect(dead_code, reason = "shared with the other tests of the core")]
mod world;

use world::{World, four_mecanum, four_omni};

thread_local! {
    static COUNT: Cell<u64> = const { Cell::new(0) };
}

struct Counting;

fn count() {
    // A thread that is ending has no counter any more.
    let _ = COUNT.try_with(|it| it.set(it.get() + 1));
}

// SAFETY: every call goes on to the system's allocator unchanged; counting allocates nothing.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        count();
        // SAFETY: the caller keeps the contract of `alloc`.
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        count();
        // SAFETY: the caller keeps the contract of `dealloc`; `pointer` came from `System`.
        unsafe { System.dealloc(pointer, layout) }
    }

    unsafe fn realloc(&self, pointer: *mut u8, layout: Layout, size: usize) -> *mut u8 {
        count();
        // SAFETY: the caller keeps the contract of `realloc`; `pointer` came from `System`.
        unsafe { System.realloc(pointer, layout, size) }
    }
}

#[global_allocator]
static COUNTING: Counting = Counting;

#[test]
fn a_step_allocates_nothing() {
    assert!(counted(|| drop(std::hint::black_box(Box::new(1)))) >= 2, "the counter counts");
    let mut phases = Vec::new();
    for plan in [four_mecanum(), four_omni()] {
        for world in drives(&plan) {
            let mut core = Core::new(&plan);
            for (tick, (inputs, outputs)) in world.tape.iter().enumerate() {
                let mut out = None;
                let n = counted(|| out = Some(core.step(inputs)));
                assert_eq!(n, 0, "tick {tick}, {:?}", outputs.phase);
                let out = out.unwrap();
                assert_eq!(out.phase, outputs.phase);
                phases.push(out.phase);
            }
            let mut state = None;
            let n = counted(|| state = Some(core.state()));
            assert_eq!(n, 0, "a snapshot");
        }
    }
    for phase in [Phase::Parked, Phase::Ready, Phase::Driving, Phase::Stopping, Phase::Tripped] {
        assert!(phases.contains(&phase), "{phase:?} was tried");
    }
}

fn counted(work: impl FnOnce()) -> u64 {
    let before = COUNT.with(Cell::get);
    work();
    COUNT.with(Cell::get) - before
}

/// Drives that go through every phase, every button and trips of many kinds.
fn drives(plan: &gripline::config::Plan) -> Vec<World> {
    type Trouble = fn(&mut World);
    let troubles: [Trouble; 9] = [
        |it| it.press(Buttons::STOP),
        |it| it.pad.present = false,
        |it| it.boards[0].mute = true,
        |it| it.boards[0].deaf = true,
        |it| it.boards[0].open = false,
        |it| it.late_us = 60_000,
        |it| it.pull(Puller::Sentinel),
        |it| it.boards[0].stuck[0] = Some(9_000.0),
        |it| {
            let now_us = it.now_us;
            it.boards[0].restart(now_us);
        },
    ];
    troubles
        .into_iter()
        .map(|trouble| {
            let mut world = World::new(plan.clone()).into_parked();
            world.tap(Buttons::FRAME.with(Buttons::PACE_UP));
            let mut world = world.at_speed(0.8, 0.4, -0.5);
            world.tap(Buttons::FRAME.with(Buttons::ZERO_HEADING));
            world.run_s(0.5);
            world.hold(0.0);
            world.sticks(0.0, 0.0, 0.0);
            world.run_s(1.0);
            world.hold(1.0);
            world.tick();
            world.sticks(0.0, 1.0, 0.0);
            world.run_s(0.5);
            trouble(&mut world);
            world.run_s(1.5);
            world.hold(0.0);
            world.sticks(0.0, 0.0, 0.0);
            world.let_go(Buttons::STOP);
            world.pad.present = true;
            world.late_us = 0;
            world.boards[0].mute = false;
            world.boards[0].deaf = false;
            world.boards[0].stuck[0] = None;
            if !world.boards[0].open {
                world.boards[0].open = true;
                world.boards[0].openings += 1;
            }
            world.run_s(0.5);
            world.reset();
            world.tap(Buttons::READY);
            world.quit = true;
            world.run_s(0.3);
            assert_eq!(world.phase(), Phase::Parked, "{:?}", world.out);
            world
        })
        .collect()
}
