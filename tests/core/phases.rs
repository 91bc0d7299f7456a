//! Every state that the core can get into, by every combination of what can happen in a tick: breadth first over the
//! outlines of states reached by real steps. Ticks of 50 ms and short times, so that few ticks go through everything.

use std::collections::{BTreeMap, BTreeSet, HashSet, VecDeque};

use gripline::config::{Plan, StopCategory};
use gripline::core::io::{Buttons, ConsoleInput, Heard, Inputs, LinkInput, PadInput, Pull, Puller};
use gripline::core::state::Outline;
use gripline::core::{Core, Outputs, Phase};
use gripline::shaping::Sticks;
use gripline::units::Mono;
use gripline::wire::{ChannelState, Feedback, Identity, ToDrivers, flag, status};

use crate::world::{plan, promises};

/// What goes wrong in a tick.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Wrong {
    Nothing,
    /// No feedback comes.
    Mute,
    /// Nothing of ours is acknowledged.
    Deaf,
    Fault,
    StopInput,
    /// The driver has latched by itself.
    Latched,
    Restarted,
    PortGone,
    Late,
    Sentinel,
    /// The wheels turn although they should not, or not as told.
    Turning,
    /// The driver does not take Clear.
    ClearRefused,
    /// The stop does not arrive.
    StopLost,
}

const WRONG: [Wrong; 13] = [
    Wrong::Nothing,
    Wrong::Mute,
    Wrong::Deaf,
    Wrong::Fault,
    Wrong::StopInput,
    Wrong::Latched,
    Wrong::Restarted,
    Wrong::PortGone,
    Wrong::Late,
    Wrong::Sentinel,
    Wrong::Turning,
    Wrong::ClearRefused,
    Wrong::StopLost,
];

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Hold {
    Off,
    Run,
    Squeezed,
}

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Button {
    None,
    Ready,
    ResetPressed,
    ResetHeld,
    Stop,
}

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Console {
    Nothing,
    Stop,
    Reset,
}

/// One combination.
#[derive(Clone, Copy, Debug)]
struct Happens {
    pad: bool,
    hold: Hold,
    centred: bool,
    button: Button,
    console: Console,
    quit: bool,
    wrong: Wrong,
}

fn combinations() -> Vec<Happens> {
    let mut all = Vec::new();
    for wrong in WRONG {
        for console in [Console::Nothing, Console::Stop, Console::Reset] {
            for quit in [false, true] {
                let of_pad =
                    |pad, hold, centred, button| Happens { pad, hold, centred, button, console, quit, wrong };
                all.push(of_pad(false, Hold::Off, true, Button::None));
                for hold in [Hold::Off, Hold::Run, Hold::Squeezed] {
                    for centred in [true, false] {
                        for button in [
                            Button::None,
                            Button::Ready,
                            Button::ResetPressed,
                            Button::ResetHeld,
                            Button::Stop,
                        ] {
                            all.push(of_pad(true, hold, centred, button));
                        }
                    }
                }
            }
        }
    }
    all
}

/// Those that may last: levels, not edges.
fn lasting() -> Vec<Happens> {
    let lasts = |it: &Happens| {
        let wrong = matches!(
            it.wrong,
            Wrong::Nothing
                | Wrong::Mute
                | Wrong::Deaf
                | Wrong::Turning
                | Wrong::ClearRefused
                | Wrong::StopLost
        );
        let asks = it.quit || it.console != Console::Nothing || it.hold == Hold::Squeezed;
        wrong && !asks && matches!(it.button, Button::None | Button::ResetHeld)
    };
    combinations().into_iter().filter(lasts).collect()
}

/// How far somebody has come on the only way from a trip to motion.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
enum Way {
    Tripped,
    Released,
    ResetAsked,
    ReadyAsked,
    Pressed,
}

/// The core, and drivers that do what they are told at once.
#[derive(Clone)]
struct Node {
    core: Core,
    out: Outputs,
    now: Mono,
    latched: bool,
    boot: u16,
    clock_us: u32,
    ack: u8,
    angle: i32,
    openings: u32,
    stop_line: Option<Pull>,
    pulls: u32,
    way: Way,
}

type Key = (Outline, bool, bool, Way);

impl Node {
    fn new(plan: &Plan) -> Self {
        Self {
            core: Core::new(plan),
            out: Outputs::default(),
            now: Mono::from_ns(1_000_000_000),
            latched: false,
            boot: 0,
            clock_us: 0,
            ack: 0,
            angle: 0,
            openings: 1,
            stop_line: None,
            pulls: 0,
            way: Way::ResetAsked,
        }
    }

    fn key(&self) -> Key {
        // Which cause it was decides nothing any more, beyond what stands in the outline.
        let outline = Outline { cause: None, ..self.core.outline() };
        (outline, self.latched, self.stop_line.is_some(), self.way)
    }

    fn pull(&mut self, by: Puller) {
        self.pulls += 1;
        self.stop_line = Some(Pull { number: self.pulls, by });
    }

    /// What the core will see.
    fn inputs(&mut self, plan: &Plan, it: Happens) -> Inputs {
        let due = self.now.plus_ns(plan.tick.period_ns());
        self.now = if it.wrong == Wrong::Late { due.plus_ns(61_000_000) } else { due };
        match it.wrong {
            Wrong::Latched => self.latched = true,
            Wrong::Restarted => {
                (self.boot, self.latched) = (self.boot + 1, false);
            }
            Wrong::Sentinel => self.pull(Puller::Sentinel),
            Wrong::PortGone => self.openings += 1,
            Wrong::Nothing
            | Wrong::Mute
            | Wrong::Deaf
            | Wrong::Fault
            | Wrong::StopInput
            | Wrong::Late
            | Wrong::Turning
            | Wrong::ClearRefused
            | Wrong::StopLost => {}
        }
        let hold = match it.hold {
            Hold::Off => 0.0,
            Hold::Run => 0.7,
            Hold::Squeezed => 0.95,
        };
        let (down, pressed) = match it.button {
            Button::None => (Buttons(0), Buttons(0)),
            Button::Ready => (Buttons::READY, Buttons::READY),
            Button::ResetPressed => (Buttons::RESET, Buttons::RESET),
            Button::ResetHeld => (Buttons::RESET, Buttons(0)),
            Button::Stop => (Buttons::STOP, Buttons::STOP),
        };
        let sticks = if it.centred { Sticks::default() } else { Sticks { x: 1.0, y: 0.0, turn: 0.0 } };
        let pad = PadInput {
            present: true,
            streams: true,
            last_sign: self.now,
            sticks,
            hold,
            hold_least: hold,
            down,
            pressed,
        };
        Inputs {
            now: self.now,
            due,
            pad: if it.pad { pad } else { PadInput::default() },
            links: [self.link(plan, it.wrong)].into_iter().collect(),
            console: ConsoleInput { stop: it.console == Console::Stop, reset: it.console == Console::Reset },
            quit: it.quit,
            stop_line: self.stop_line,
        }
    }

    fn link(&mut self, plan: &Plan, wrong: Wrong) -> LinkInput {
        if wrong == Wrong::PortGone {
            return LinkInput::default();
        }
        let asked = self.out.frames.iter().any(|it| it.message == ToDrivers::Ask);
        let own = &plan.links[0];
        let identity = Identity {
            version: 1,
            flags: flag::SIMULATED,
            channels: 4,
            speed_lsb_urad_s: own.speed_lsb_urad_s,
            angle_lsb_urad: own.angle_lsb_urad,
            silence_ms: 1000,
            ramp_max_ms: 10_000,
            boot: self.boot,
            name: own.expect.parse().unwrap(),
        };
        let mut bits = 0;
        for (set, bit) in [
            (self.latched, status::LATCHED),
            (wrong == Wrong::StopInput, status::STOP_INPUT_OPEN),
            (wrong == Wrong::Fault, status::ENCODER),
        ] {
            bits |= if set { bit } else { 0 };
        }
        self.clock_us += 50_000;
        let told = |index: usize| self.out.view.sent_counts.get(index).copied().unwrap_or(0);
        let turning = wrong == Wrong::Turning;
        if turning {
            self.angle += 2000;
        }
        let channels = (0..4)
            .map(|it| ChannelState { angle: self.angle, speed: if turning { 20_000 } else { told(it) } });
        let feedback = Feedback {
            ack: self.ack,
            status: bits,
            token: 0,
            boot: self.boot,
            clock_us: self.clock_us,
            channels: channels.collect(),
            ..Feedback::default()
        };
        let mute = wrong == Wrong::Mute;
        LinkInput {
            open: true,
            openings: self.openings,
            identity: (asked && !mute).then_some(identity),
            feedback: (!mute).then_some(Heard { at: self.now, feedback }),
            status_seen: if mute { 0 } else { bits },
            unsent: Some(0),
            ..LinkInput::default()
        }
    }

    /// One tick: the core decides, the drivers follow.
    fn step(&mut self, plan: &Plan, it: Happens) {
        let inputs = self.inputs(plan, it);
        let before = self.core.outline();
        self.out = self.core.step(&inputs);
        let wrong = it.wrong;
        if self.out.pull_stop {
            self.pull(Puller::Core);
            self.latched |= wrong != Wrong::StopLost && wrong != Wrong::PortGone;
        }
        if self.out.frames.iter().any(|it| matches!(it.message, ToDrivers::Clear { .. })) {
            self.latched &= wrong == Wrong::ClearRefused;
        }
        if self.out.release_stop_line == self.stop_line.map(|it| it.number) {
            self.stop_line = None;
        }
        if wrong != Wrong::Deaf {
            self.ack = self.out.stop_sequence[0].wrapping_sub(1);
        }
        self.go_on(&before, it);
        self.check(plan, &before, it);
    }

    /// Notes how far somebody has come from a trip to motion.
    fn go_on(&mut self, before: &Outline, it: Happens) {
        let released = it.hold == Hold::Off && it.centred;
        let reset =
            matches!(it.button, Button::ResetPressed | Button::ResetHeld) || it.console == Console::Reset;
        if before.phase == Phase::Tripped {
            if self.way == Way::Tripped && released {
                self.way = Way::Released;
            }
            if self.way == Way::Released && released && reset {
                self.way = Way::ResetAsked;
            }
        }
        match self.out.phase {
            Phase::Tripped if before.phase != Phase::Tripped => self.way = Way::Tripped,
            Phase::Parked => {
                assert!(self.way >= Way::ResetAsked, "Parked without a reset: {before:?} {it:?}");
                self.way = Way::ResetAsked;
            }
            Phase::Ready => {
                let ready = it.button == Button::Ready && before.phase == Phase::Parked;
                assert!(self.way >= Way::ReadyAsked || ready, "{before:?} {it:?}");
                self.way = Way::ReadyAsked;
            }
            Phase::Driving if before.phase == Phase::Ready => {
                assert!(self.way == Way::ReadyAsked && it.hold == Hold::Run, "{before:?} {it:?}");
                self.way = Way::Pressed;
            }
            Phase::Driving | Phase::Stopping => assert_eq!(self.way, Way::Pressed),
            Phase::Tripped => {}
        }
    }

    /// The rules of DESIGN 4 in words.
    fn check(&self, plan: &Plan, before: &Outline, it: Happens) {
        let (from, out, to) = (before.phase, &self.out, self.out.phase);
        let say = || format!("{before:?}\n{it:?}\n{out:?}");
        promises(plan, out);
        // What trips at once, trips from every phase, whatever else is asked in the same tick.
        let known = before.links[0][2];
        let fault = match it.wrong {
            Wrong::Fault | Wrong::StopInput | Wrong::Latched | Wrong::Late | Wrong::Sentinel => true,
            Wrong::Restarted => before.links[0][1],
            Wrong::PortGone => known && before.links[0][0],
            Wrong::Nothing
            | Wrong::Mute
            | Wrong::Deaf
            | Wrong::Turning
            | Wrong::ClearRefused
            | Wrong::StopLost => false,
        };
        let first_tick = out.view.feedback_age_s.is_empty();
        let late_at_start = it.wrong == Wrong::Late && self.clock_us <= 50_000;
        let stop = it.console == Console::Stop || it.button == Button::Stop || it.hold == Hold::Squeezed;
        let pad_gone = before.pad_present && !it.pad;
        if (fault && !first_tick && !late_at_start) || stop || pad_gone {
            assert_eq!(to, Phase::Tripped, "{}", say());
        }
        // Category: torque off at once for a runaway and for wheels that do not slow down, else a ramp.
        if from != Phase::Tripped && to == Phase::Tripped {
            let cause = out.cause.unwrap();
            let zero = cause.category(StopCategory::One) == StopCategory::Zero;
            assert_eq!((out.pull_stop, out.stop_ramp_ms == 0), (true, zero), "{}", say());
            assert_eq!(zero, matches!(cause.code(), "runaway" | "not-slowing"));
        }
        // No motion without hold.
        if to == Phase::Driving {
            let held = it.pad && it.hold == Hold::Run && !it.quit;
            assert!(held, "{}", say());
            if from == Phase::Ready {
                assert!(before.armed && !before.pressed && it.centred, "{}", say());
            }
        }
        if from == Phase::Driving && (it.hold == Hold::Off || it.quit) {
            assert!(matches!(to, Phase::Stopping | Phase::Tripped), "{}", say());
        }
        // Off-centre, in Stopping and in Parked a press is spent.
        if from == Phase::Ready && it.hold == Hold::Run && !it.centred {
            assert_ne!(to, Phase::Driving, "{}", say());
        }
        if to == Phase::Ready && from != Phase::Ready {
            assert!(!self.core.outline().armed, "{}", say());
        }
        if from == Phase::Parked && to == Phase::Ready {
            let asked = it.pad && it.button == Button::Ready && it.hold == Hold::Off && it.centred;
            assert!(asked && !it.quit && !before.quitting && !self.latched, "{}", say());
        }
        // Out of Tripped: all unlatched, by a Clear that was on its way.
        if from == Phase::Tripped && to == Phase::Parked {
            assert!(before.clearing && !self.latched && self.stop_line.is_none(), "{}", say());
        }
        let after = self.core.outline();
        if after.clearing && !before.clearing {
            let asked = it.console == Console::Reset && !before.reset_at_pad
                || matches!(it.button, Button::ResetPressed | Button::ResetHeld);
            assert!(asked && it.pad && it.hold == Hold::Off && it.centred && !before.quitting, "{}", say());
        }
        // The stop is repeated until the drivers are latched.
        if to == Phase::Tripped && !after.clearing && after.links[0][0] && !after.links[0][3] {
            assert!(out.pull_stop, "{}", say());
        }
        // A stop that stands outside Tripped has just been answered.
        assert!(to == Phase::Tripped || self.stop_line.is_none(), "{}", say());
    }
}

fn quick_plan() -> Plan {
    plan(&format!(
        "{}\n[loop]\nrate_hz = 20.0\n[pad]\nhold_on = 0.5\nhold_off = 0.4\nhold_squeeze = 0.9\n[guard]\nlate_ms = \
         60.0\nstandstill_s = 0.05\nreset_hold_s = 0.2\nstop_margin_s = 0.3\nready_idle_s = 1.0\nfollow_s = \
         0.1\nslowing_s = 0.05\nrunaway_s = 0.1\nfollow_lag_s = 0.0\ndriver_ms = 0.0\nskid_s = 0.2\nnot_heard_ms = \
         170.0\nfeedback_quiet_ms = 170.0\n",
        include_str!("tray.toml").replace("smoothing_s = 0.1", "smoothing_s = 0.05")
    ))
}

#[test]
fn every_reachable_state_keeps_every_rule() {
    let plan = quick_plan();
    let (combinations, lasting) = (combinations(), lasting());
    let mut seen: HashSet<Key> = HashSet::new();
    let mut open: VecDeque<Node> = VecDeque::from([Node::new(&plan)]);
    let mut edges: BTreeSet<(&str, &str)> = BTreeSet::new();
    let mut causes: BTreeMap<&str, usize> = BTreeMap::new();
    let mut steps = 0_u64;
    while let Some(node) = open.pop_front() {
        let mut reach = |next: Node| {
            if let Some(cause) = next.out.cause {
                *causes.entry(cause.code()).or_default() += 1;
            }
            if seen.insert(next.key()) {
                open.push_back(next);
            }
        };
        for it in &combinations {
            let mut next = node.clone();
            next.step(&plan, *it);
            steps += 1;
            edges.insert((node.out.phase.name(), next.out.phase.name()));
            reach(next);
        }
        for it in &lasting {
            let mut next = node.clone();
            for _ in 0..26 {
                let from = next.out.phase.name();
                next.step(&plan, *it);
                steps += 1;
                edges.insert((from, next.out.phase.name()));
            }
            reach(next);
        }
    }
    println!("{} outlines, {steps} steps, causes {causes:?}", seen.len());
    let allowed = [
        ("Parked", "Parked Ready Tripped"),
        ("Ready", "Ready Driving Parked Tripped"),
        ("Driving", "Driving Stopping Tripped"),
        ("Stopping", "Stopping Ready Parked Tripped"),
        ("Tripped", "Tripped Parked"),
    ];
    let allowed: BTreeSet<(&str, &str)> =
        allowed.iter().flat_map(|(from, to)| to.split(' ').map(move |to| (*from, to))).collect();
    assert_eq!(edges, allowed, "all of these and no others");
    for cause in [
        "stop-pad",
        "stop-squeeze",
        "stop-console",
        "stop-input",
        "pad-gone",
        "feedback-quiet",
        "not-heard",
        "write-fails",
        "late-tick",
        "no-tick",
        "driver-says",
        "not-following",
        "runaway",
        "found-latched",
    ] {
        assert!(causes.contains_key(cause), "{cause} was reached");
    }
}
