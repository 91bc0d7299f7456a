//! The laws of shaping, over random layouts, limits and histories of sticks, paces, frames and headings.

use gripline::base::{Layout, PerWheel, Pose, Twist, Wheel, pose};
use gripline::shaping::{
    Frame, Goal, Limits, Pace, Response, Saturation, Shaper, ShaperSettings, Sticks, demand,
};
use proptest::prelude::*;

const PERIOD_S: f64 = 0.005;

fn wheel() -> impl Strategy<Value = Wheel> {
    (0.05..0.4_f64, 0.0..6.3_f64, 0.0..6.3_f64, -0.9..0.9_f64, 0.03..0.12_f64).prop_map(
        |(distance, at, drive_rad, roller_rad, radius_m)| Wheel {
            x_m: distance * at.cos(),
            y_m: distance * at.sin(),
            drive_rad,
            roller_rad,
            radius_m,
        },
    )
}

/// Layouts that a person would build: three to twelve wheels of any kind, not hopelessly conditioned.
fn layout() -> impl Strategy<Value = Layout> {
    prop::collection::vec(wheel(), 3..=12).prop_filter_map("near-deficient layout", |wheels| {
        let condition = gripline::base::analysis::analyse(&wheels).condition;
        (condition < 15.0).then(|| Layout::new(&wheels).ok())?
    })
}

#[derive(Clone, Debug)]
struct Machine {
    settings: ShaperSettings,
    paces: [Pace; 2],
}

/// A machine that the configuration check would accept: paces within the wheels, grip and accelerations possible.
fn machine() -> impl Strategy<Value = Machine> {
    let saturation =
        prop::sample::select(vec![Saturation::Together, Saturation::KeepTurn, Saturation::KeepTravel]);
    (
        layout(),
        (0.3..3.0_f64, 0.3..3.0_f64, 0.5..4.0_f64, 0.5..8.0_f64, 0.3..3.0_f64, 0.0..0.3_f64),
        saturation,
        (0.2..1.4_f64, 0.2..1.0_f64, 0.2..1.0_f64),
        (10.0..40.0_f64, 1.05..4.0_f64),
    )
        .prop_filter_map(
            "not a machine that check accepts",
            |(layout, limits, saturation, share, wheels)| {
                let (speed_up_m_s2, slow_down_m_s2, stop_m_s2, turn_rad_s2, grip_m_s2, smoothing_s) = limits;
                let limits = Limits {
                    speed_up_m_s2,
                    slow_down_m_s2,
                    stop_m_s2,
                    turn_rad_s2,
                    grip_m_s2,
                    smoothing_s,
                    saturation,
                };
                let gain = |row: &[f64; 3]| row[1].hypot(row[2]);
                let max_rad_s: PerWheel<f64> = layout.rows().iter().map(|_| wheels.0).collect();
                let fastest =
                    layout.rows().iter().map(|row| wheels.0 / gain(row)).fold(f64::INFINITY, f64::min);
                let turn =
                    layout.rows().iter().map(|row| wheels.0 / row[0].abs()).fold(f64::INFINITY, f64::min);
                let fast = Pace { travel_m_s: fastest * share.0, turn_rad_s: (turn * share.1).min(6.0) };
                let slow = Pace {
                    travel_m_s: fast.travel_m_s * share.2,
                    turn_rad_s: fast.turn_rad_s * (1.2 - share.2).min(1.0),
                };
                let p = fast.travel_m_s * fast.turn_rad_s / grip_m_s2;
                let grip = grip_m_s2.min(fast.travel_m_s * fast.turn_rad_s);
                let max_rad_s2: PerWheel<f64> =
                    layout.rows().iter().map(|row| (grip * gain(row) * wheels.1).max(20.0)).collect();
                let response = Response { deadband: 0.1, curve: 1.5 };
                let settings =
                    ShaperSettings::new(layout, (max_rad_s, max_rad_s2), limits, response, PERIOD_S, 0.0);
                (p <= 4.0).then_some(Machine { settings, paces: [slow, fast] })
            },
        )
}

#[derive(Clone, Debug)]
enum Act {
    Sticks(f64, f64, f64),
    Pace(usize),
    Frame(bool),
    Shift(f64),
    Stop,
}

fn act() -> impl Strategy<Value = (Act, usize)> {
    let one = prop_oneof![
        5 => (-1.0..1.0_f64, -1.0..1.0_f64, -1.0..1.0_f64).prop_map(|(x, y, turn)| Act::Sticks(x, y, turn)),
        2 => Just(Act::Sticks(1.0, 0.0, 1.0)),
        1 => (0..2_usize).prop_map(Act::Pace),
        2 => any::<bool>().prop_map(Act::Frame),
        1 => (-3.0..3.0_f64).prop_map(Act::Shift),
        1 => Just(Act::Stop),
    ];
    (one, 1..150_usize)
}

/// What one tick of a history looked like.
struct Tick {
    stick: Twist,
    base: Twist,
    frame: Frame,
}

/// Plays a history with the heading that the base would really have; `look` sees every tick and the one before.
fn play(machine: &Machine, history: &[(Act, usize)], mut look: impl FnMut(&Tick, &Tick, bool)) {
    let mut shaper = Shaper::new(machine.settings.clone());
    let (mut sticks, mut pace, mut stop) = (Sticks::default(), machine.paces[0], false);
    let mut at = Pose::default();
    let mut before = Tick { stick: Twist::ZERO, base: Twist::ZERO, frame: Frame::Base };
    for (act, ticks) in history {
        stop = false;
        let mut shifted = false;
        match act {
            Act::Sticks(x, y, turn) => sticks = Sticks { x: *x, y: *y, turn: *turn },
            Act::Pace(index) => pace = machine.paces[*index],
            Act::Frame(room) => shaper.request_frame(if *room { Frame::Room } else { Frame::Base }),
            Act::Shift(by) => {
                at.heading_rad += by;
                shaper.shift_heading(*by);
                shifted = true;
            }
            Act::Stop => stop = true,
        }
        for _ in 0..*ticks {
            let goal = if stop { Goal::Stop } else { Goal::Follow { sticks, pace } };
            let shaped = shaper.step(goal, at.heading_rad);
            assert!(!shaped.last_check_fired, "the last check fired at {shaped:?}");
            let now =
                Tick { stick: shaped.in_stick_frame, base: shaped.in_base_frame, frame: shaper.frame() };
            look(&before, &now, now.frame == before.frame && !(shifted && now.frame == Frame::Room));
            before = now;
            shifted = false;
            at = at.then(pose::exp(shaped.in_base_frame, PERIOD_S));
        }
    }
    let _ = stop;
}

fn changed(from: Twist, to: Twist) -> Twist {
    Twist::new(to.turn_rad_s - from.turn_rad_s, to.x_m_s - from.x_m_s, to.y_m_s - from.y_m_s)
}

/// What rounding of the fixed-point average and of a few operations may add to a velocity.
const ROUNDING: f64 = 1e-9;

proptest! {
    #![proptest_config(ProptestConfig { cases: 300, ..ProptestConfig::default() })]

    #[test]
    fn no_limit_is_ever_passed(machine in machine(), history in prop::collection::vec(act(), 1..14)) {
        let settings = &machine.settings;
        let limits = &settings.limits;
        let travel_most = limits.speed_up_m_s2.max(limits.slow_down_m_s2).max(limits.stop_m_s2);
        let jerk_most = 2.0 * travel_most / limits.smoothing_s.max(PERIOD_S);
        let mut last_acceleration: Option<Twist> = None;
        play(&machine, &history, |before, now, same_frame| {
            let speeds = settings.layout.wheel_speeds(now.base);
            let old = settings.layout.wheel_speeds(before.base);
            for (i, speed) in speeds.iter().enumerate() {
                assert!(speed.abs() <= settings.max_rad_s[i] * (1.0 + ROUNDING), "wheel speed {speed}");
                let acceleration = (speed - old[i]).abs() / PERIOD_S;
                assert!(
                    acceleration <= settings.max_rad_s2[i] * (1.0 + 1e-5) + 1e-6,
                    "wheel {i} acceleration {acceleration} of {}, frame {:?} -> {:?}, {:?} -> {:?}",
                    settings.max_rad_s2[i], before.frame, now.frame, before.base, now.base
                );
            }
            let turn = (now.base.turn_rad_s - before.base.turn_rad_s).abs() / PERIOD_S;
            assert!(turn <= limits.turn_rad_s2 * (1.0 + ROUNDING) + 1e-6, "turn acceleration {turn}");
            if same_frame {
                let step = changed(before.stick, now.stick);
                let travel = step.travel_m_s() / PERIOD_S;
                assert!(travel <= travel_most * (1.0 + ROUNDING) + 1e-6, "travel acceleration {travel}");
                let acceleration = step.scaled(1.0 / PERIOD_S);
                if let Some(last) = last_acceleration {
                    let jerk = changed(last, acceleration).travel_m_s() / PERIOD_S;
                    assert!(jerk <= jerk_most * (1.0 + 1e-6) + 1e-3, "jerk {jerk} of {jerk_most}");
                }
                last_acceleration = Some(acceleration);
            } else {
                last_acceleration = None;
            }
            if now.frame == Frame::Base {
                let grip = now.base.travel_m_s() * now.base.turn_rad_s.abs();
                assert!(grip <= limits.grip_m_s2 * (1.0 + 1e-9) + 1e-9, "grip {grip}");
            }
        });
    }

    #[test]
    fn a_change_of_frame_or_heading_is_no_step(
        machine in machine(), history in prop::collection::vec(act(), 1..14),
    ) {
        let limits = machine.settings.limits;
        let most = limits.speed_up_m_s2.max(limits.slow_down_m_s2).max(limits.stop_m_s2) + limits.grip_m_s2;
        play(&machine, &history, |before, now, _| {
            // In the base frame: whatever rotates, what the wheels get moves on by no more than limits and grip.
            let step = changed(before.base, now.base).travel_m_s() / PERIOD_S;
            assert!(step <= most * (1.0 + 1e-5) + 1e-6, "step of {step} m/s^2 where {most} is allowed");
        });
    }

    #[test]
    fn a_stop_ends_at_exactly_zero_in_time(machine in machine(), history in prop::collection::vec(act(), 1..8)) {
        let limits = machine.settings.limits;
        let mut history = history;
        history.push((Act::Stop, 4000));
        let ticks: usize = history.iter().map(|it| it.1).sum();
        let (mut seen, mut stop_began, mut stood) = (0, Twist::ZERO, None);
        let machine_ref = &machine;
        play(machine_ref, &history, |before, now, _| {
            seen += 1;
            let into = (seen + 4000_usize).checked_sub(ticks);
            if into == Some(1) {
                stop_began = before.stick;
            }
            if into.is_some() && stood.is_none() && now.base == Twist::ZERO {
                stood = into;
            }
            if stood.is_some() && into.is_some() {
                assert_eq!(now.base, Twist::ZERO, "moved again after standing");
            }
        });
        // The rate-limited velocity may be ahead of the smoothed one by the acceleration of one smoothing span; wheels
        // may slow the ramp down, so their limit counts too.
        let span = limits.smoothing_s + 2.0 * PERIOD_S;
        let ahead = limits.speed_up_m_s2.max(limits.slow_down_m_s2).max(limits.stop_m_s2) * span;
        let ahead_turn = limits.turn_rad_s2 * span;
        let worst = Twist::new(stop_began.turn_rad_s.abs() + ahead_turn, stop_began.travel_m_s() + ahead, 0.0);
        let settings = &machine.settings;
        let grip = limits.grip_m_s2.min(machine.paces[1].travel_m_s * machine.paces[1].turn_rad_s);
        let wheels = settings.layout.rows().iter().zip(&settings.max_rad_s2).map(|(row, most)| {
            let gain = row[1].hypot(row[2]);
            (row[0].abs() * worst.turn_rad_s + gain * worst.x_m_s) / (most - gain * grip).max(most * 1e-3)
        }).fold(0.0, f64::max);
        let allowed = (worst.x_m_s / limits.stop_m_s2).max(worst.turn_rad_s / limits.turn_rad_s2).max(wheels)
            + limits.smoothing_s + 3.0 * PERIOD_S;
        let stood_s = stood.expect("never stood") as f64 * PERIOD_S;
        prop_assert!(stood_s <= allowed, "stood after {stood_s} s, allowed {allowed}");
    }

    #[test]
    fn saturation_of_the_whole_keeps_the_direction(
        machine in machine(), x in -1.0..1.0_f64, y in -1.0..1.0_f64, turn in -1.0..1.0_f64, room: bool,
    ) {
        let mut settings = machine.settings.clone();
        settings.limits.saturation = Saturation::Together;
        settings.response = Response { deadband: 0.0, curve: 1.0 };
        let frame = if room { Frame::Room } else { Frame::Base };
        let length = x.hypot(y).max(1.0);
        let asked = Twist::new(
            turn * machine.paces[1].turn_rad_s,
            x / length * machine.paces[1].travel_m_s,
            y / length * machine.paces[1].travel_m_s,
        );
        let got = demand(&settings, Sticks { x, y, turn }, machine.paces[1], frame);
        let share = got.travel_m_s() / asked.travel_m_s();
        prop_assert!(share <= 1.0 + 1e-12);
        for (got, asked) in [
            (got.x_m_s, asked.x_m_s), (got.y_m_s, asked.y_m_s), (got.turn_rad_s, asked.turn_rad_s),
        ] {
            prop_assert!((got - share * asked).abs() < 1e-9, "{got} is not {share} of {asked}");
        }
    }

    #[test]
    fn what_is_kept_is_kept_as_far_as_the_wheels_go(
        machine in machine(), x in -1.0..1.0_f64, y in -1.0..1.0_f64, turn in -1.0..1.0_f64, room: bool,
    ) {
        let frame = if room { Frame::Room } else { Frame::Base };
        let by = |saturation, sticks| {
            let mut settings = machine.settings.clone();
            settings.limits.saturation = saturation;
            settings.limits.grip_m_s2 = 1e6;
            demand(&settings, sticks, machine.paces[1], frame)
        };
        let sticks = Sticks { x, y, turn };
        let keep_turn = by(Saturation::KeepTurn, sticks);
        let keep_travel = by(Saturation::KeepTravel, sticks);
        let travel_alone = by(Saturation::Together, Sticks { x, y, turn: 0.0 });
        prop_assert!((keep_travel.travel_m_s() - travel_alone.travel_m_s()).abs() < 1e-9);
        let alone = by(Saturation::Together, Sticks { x: 0.0, y: 0.0, turn });
        prop_assert!((keep_turn.turn_rad_s - alone.turn_rad_s).abs() < 1e-9);
    }

    #[test]
    fn a_straight_line_in_the_room_stays_straight_while_spinning(
        machine in machine(), direction in 0.0..core::f64::consts::TAU, turn in -1.0..1.0_f64,
    ) {
        let mut shaper = Shaper::new(machine.settings.clone());
        shaper.request_frame(Frame::Room);
        let sticks = Sticks { x: direction.cos(), y: direction.sin(), turn };
        let mut at = Pose::default();
        let mut asked_m = 0.0;
        for _ in 0..2000 {
            let shaped = shaper.step(Goal::Follow { sticks, pace: machine.paces[1] }, at.heading_rad);
            asked_m += shaped.in_stick_frame.travel_m_s() * PERIOD_S;
            at = at.then(pose::exp(shaped.in_base_frame, PERIOD_S));
        }
        let along = at.x_m * direction.cos() + at.y_m * direction.sin();
        let across = at.y_m * direction.cos() - at.x_m * direction.sin();
        // As far as was asked for, and never nowhere: the slowest of these machines creeps, so no fixed way can be named.
        prop_assert!(asked_m > 0.0, "was never asked to move");
        prop_assert!((along - asked_m).abs() <= 1e-4 * asked_m, "{along} m of {asked_m} m");
        prop_assert!(across.abs() <= 1e-4 * along, "{across} m off after {along} m");
    }
}

#[test]
fn sticks_at_rest_ask_for_nothing_and_garbage_neither() {
    let response = Response { deadband: 0.1, curve: 2.0 };
    for value in [0.0, 0.05, -0.099, f64::NAN, f64::INFINITY] {
        let sticks = Sticks { x: value, y: 0.0, turn: value };
        assert_eq!(gripline::shaping::stick_response(sticks, &response), Sticks::default(), "{value}");
        assert_eq!(gripline::shaping::centred(sticks, &response), value.is_finite(), "{value}");
    }
}
