//! Nothing in the stop path, on the line, in the recorder's producers or in the hand-over from hands and wire allocates
//! after start.
#![expect(unsafe_code, reason = "a global allocator that counts cannot be written without")]

use std::alloc::{GlobalAlloc, Layout, System};
use std::cell::Cell;

use gripline::config::{EXAMPLE, parse};
use gripline::core::io::{PadInput, Puller};
use gripline::core::{Core, Event, Inputs};
use gripline::standin::hands::{Hands, Script};
use gripline::sys::tty;
use gripline::units::Mono;
use gripline::wire::{Deframer, Direction, MAX_ON_LINE, ToDrivers, emit_to_drivers, parse_to_drivers};

thread_local! {
    static COUNT: Cell<u64> = const { Cell::new(0) };
}

struct Counting;

// SAFETY: every call goes on to the system's allocator unchanged; counting allocates nothing.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        let _ = COUNT.try_with(|it| it.set(it.get() + 1));
        // SAFETY: the caller keeps the contract of `alloc`.
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        let _ = COUNT.try_with(|it| it.set(it.get() + 1));
        // SAFETY: the caller keeps the contract of `dealloc`; `pointer` came from `System`.
        unsafe { System.dealloc(pointer, layout) }
    }
}

#[global_allocator]
static COUNTING: Counting = Counting;

fn none(what: &str, mut it: impl FnMut()) {
    // The first call may set up what belongs to a thread.
    it();
    let before = COUNT.with(Cell::get);
    for _ in 0..50 {
        it();
    }
    assert_eq!(COUNT.with(Cell::get), before, "{what} allocates");
}

#[test]
fn line_stop_line_recorder_hands_and_wire_allocate_nothing() {
    let before = COUNT.with(Cell::get);
    drop(std::hint::black_box(Box::new(1)));
    assert!(COUNT.with(Cell::get) >= before + 2, "the counter counts");

    let mut plan = parse(EXAMPLE, "example").unwrap_or_else(|it| panic!("{}", it[0])).0;
    let dir = tempfile::tempdir().unwrap();
    let mut recorder = gripline::record::start(dir.path(), &plan).unwrap();
    let (master, slave) = tty::open_pty().unwrap();
    plan.links[0].port = slave;
    let tap_recorder = recorder.clone();
    let tap: gripline::link::Tap =
        std::sync::Arc::new(move |link, way, bytes, at| tap_recorder.frame(link, way, at, bytes));
    let mut links = gripline::link::start(&plan, false, tap).unwrap();

    let mut frame = [0; MAX_ON_LINE];
    let len = emit_to_drivers(1, &ToDrivers::Ask, &mut frame);
    none("sending a frame", || {
        links.lines[0].send(&frame[..len], true);
        let _ = links.lines[0].unsent_bytes();
    });
    let mut number = 0;
    none("the stop line", || {
        links.stop.arm(0, 7, 300);
        number = links.stop.pull(Puller::PadStop).number;
        links.stop.repeat();
        links.stop.release(number);
    });
    let core = Core::new(&plan);
    let (mut inputs, state) = (Inputs::default(), core.state());
    inputs.links.push(gripline::core::io::LinkInput::default());
    let outputs = Core::new(&plan).step(&inputs);
    none("recording", || {
        recorder.frame(0, Direction::ToDrivers, Mono::from_ns(5), &frame[..len]);
        recorder.tick(&inputs, &outputs);
        recorder.pad(Mono::from_ns(5), &PadInput::default());
        recorder.event(Mono::from_ns(5), &Event::HeadingZeroed);
        recorder.snapshot(Mono::from_ns(5), &state);
    });
    let mut hands = Hands::new(Script::parse("0.5,South,1\n").unwrap(), &plan.pad);
    none("scripted hands", || {
        std::hint::black_box(hands.at(0.6, Mono::from_ns(600_000_000)));
    });
    none("frames to bytes and back", || {
        let len = emit_to_drivers(3, &ToDrivers::Clear { token: 9 }, &mut frame);
        let mut deframer = Deframer::new();
        for byte in &frame[..len] {
            if let Some(Ok(plain)) = deframer.push(*byte) {
                assert!(parse_to_drivers(plain).is_ok());
            }
        }
    });
    drop(master);
}
