//! Whatever comes in, the core does not panic and turns no wheel outside Driving and Stopping.

use gripline::core::Core;
use gripline::core::io::{Buttons, ConsoleInput, Heard, Inputs, LinkInput, Outputs, PadInput, Pull, Puller};
use gripline::shaping::Sticks;
use gripline::units::Mono;
use gripline::wire::{ChannelState, Feedback, Identity};
use proptest::prelude::*;

use crate::world::{World, four_omni, promises};

fn number() -> impl Strategy<Value = f64> {
    prop_oneof![
        -1.2..1.2_f64,
        Just(0.0),
        Just(1.0),
        Just(f64::NAN),
        Just(f64::INFINITY),
        Just(f64::NEG_INFINITY),
        any::<f64>(),
    ]
}

fn buttons() -> impl Strategy<Value = Buttons> {
    prop_oneof![Just(Buttons(0)), any::<u8>().prop_map(Buttons), (0..8_u8).prop_map(|it| Buttons(1 << it))]
}

/// Times that wander, jump and go backwards.
fn time() -> impl Strategy<Value = Mono> {
    prop_oneof![0..3_000_000_000_u64, any::<u64>()].prop_map(Mono::from_ns)
}

fn pad() -> impl Strategy<Value = PadInput> {
    (
        (any::<bool>(), any::<bool>(), time()),
        (number(), number(), number(), number(), number()),
        (buttons(), buttons()),
    )
        .prop_map(|((present, streams, last_sign), (x, y, turn, hold, hold_least), (down, pressed))| {
            PadInput {
                present,
                streams,
                last_sign,
                sticks: Sticks { x, y, turn },
                hold,
                hold_least,
                down,
                pressed,
            }
        })
}

fn feedback() -> impl Strategy<Value = Feedback> {
    let channel = || (any::<i32>(), any::<i16>());
    let channels =
        prop_oneof![proptest::collection::vec(channel(), 2), proptest::collection::vec(channel(), 0..=29)];
    let words = (any::<u8>(), any::<u16>(), any::<u16>(), 0..3_u16, any::<u32>(), any::<i16>(), any::<u16>());
    (words, channels).prop_map(|((ack, status, token, boot, clock_us, yaw_rate, refused), channels)| {
        Feedback {
            ack,
            status,
            token,
            boot,
            clock_us,
            supply_mv: 0,
            yaw_rate,
            refused,
            channels: channels.into_iter().map(|(angle, speed)| ChannelState { angle, speed }).collect(),
        }
    })
}

fn identity() -> impl Strategy<Value = Identity> {
    (0..3_u8, any::<u8>(), 0..6_u8, 0..3_u16, prop_oneof![Just("crate carrier left"), Just(""), Just("x")])
        .prop_map(|(version, flags, channels, boot, name)| Identity {
            version,
            flags,
            channels,
            speed_lsb_urad_s: 1000,
            angle_lsb_urad: 500,
            silence_ms: 500,
            ramp_max_ms: 9000,
            boot,
            name: name.parse().unwrap(),
        })
}

fn link() -> impl Strategy<Value = LinkInput> {
    (
        prop::bool::weighted(0.9),
        0..3_u32,
        proptest::option::of(identity()),
        proptest::option::of((time(), feedback())),
        any::<u16>(),
        proptest::option::of(0..4_u16),
        any::<bool>(),
    )
        .prop_map(|(open, openings, identity, feedback, status_seen, unsent, write_blocked)| LinkInput {
            open,
            openings,
            identity,
            feedback: feedback.map(|(at, feedback)| Heard { at, feedback }),
            status_seen,
            dropped: 0,
            unsent,
            write_blocked,
        })
}

fn inputs() -> impl Strategy<Value = Inputs> {
    let pulls = prop_oneof![
        Just(None),
        (0..4_u32, 0..8_usize).prop_map(|(number, by)| {
            let by = Puller::ALL[by];
            Some(Pull { number, by })
        })
    ];
    (
        (time(), time(), pad(), proptest::collection::vec(link(), 0..=8)),
        (any::<bool>(), any::<bool>(), any::<bool>(), pulls),
    )
        .prop_map(|((now, due, pad, links), (stop, reset, quit, stop_line))| Inputs {
            now,
            due,
            pad,
            links: links.into_iter().collect(),
            console: ConsoleInput { stop, reset },
            quit,
            stop_line,
        })
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(300))]

    #[test]
    fn anything_from_the_start(tape in proptest::collection::vec(inputs(), 1..60)) {
        let plan = four_omni();
        let mut core = Core::new(&plan);
        for inputs in &tape {
            promises(&plan, &core.step(inputs));
        }
    }

    /// A sound drive in which single things go wrong: garbage that starts from motion.
    #[test]
    fn anything_while_driving(tape in proptest::collection::vec((0..20_u8, inputs()), 1..60)) {
        thread_local! {
            static DRIVING: (Core, Inputs, Outputs) = {
                let world = World::new(four_omni()).at_speed(0.7, -0.5, 0.4);
                (world.core, world.inputs, world.out)
            };
        }
        let plan = four_omni();
        let (mut core, mut sound, mut out) = DRIVING.with(Clone::clone);
        for (part, garbage) in tape {
            sound.now = sound.now.plus_ns(plan.tick.period_ns());
            sound.due = sound.now;
            sound.pad.last_sign = sound.now;
            for (link, sequence) in sound.links.iter_mut().zip(&out.stop_sequence) {
                let heard = link.feedback.as_mut().unwrap();
                heard.at = sound.now;
                heard.feedback.clock_us += 5_000;
                heard.feedback.ack = sequence.wrapping_sub(1);
            }
            let mut inputs = sound.clone();
            match part {
                0 => inputs.pad = garbage.pad,
                1 => inputs.links = garbage.links,
                2 => inputs.now = garbage.now,
                3 => inputs.due = garbage.due,
                4 => inputs.pad.sticks = garbage.pad.sticks,
                5 => inputs.console = garbage.console,
                6 => inputs.stop_line = garbage.stop_line,
                _ => {}
            }
            out = core.step(&inputs);
            promises(&plan, &out);
        }
    }
}
