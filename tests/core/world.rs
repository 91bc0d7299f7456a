//! The core in simulated time against the drivers' side of the line: bytes both ways, plain first-order wheels, and
//! every fault that a guard is there for.

use gripline::config::{self, Plan};
use gripline::core::io::{Buttons, ConsoleInput, Heard, LinkInput, PadInput, Pull, Puller};
use gripline::core::{Core, Event, Inputs, Outputs, Phase};
use gripline::shaping::Sticks;
use gripline::units::Mono;
use gripline::wire::driver::{Driver, Measured};
use gripline::wire::{
    ChannelState, Deframer, FromDrivers, Identity, MAX_ON_LINE, Mode, ToDrivers, emit_to_drivers, flag,
    parse_from_drivers,
};

/// Steps of the drivers and wheels.
const STEP_US: u64 = 250;

pub(crate) fn four_mecanum() -> Plan {
    plan(include_str!("tray.toml"))
}

pub(crate) fn four_omni() -> Plan {
    plan(include_str!("crate.toml"))
}

pub(crate) fn plan(text: &str) -> Plan {
    match config::parse(text, "test.toml") {
        Ok((plan, _)) => plan,
        Err(mistakes) => panic!("{}", mistakes.iter().map(ToString::to_string).collect::<String>()),
    }
}

/// The four mecanum wheels with more lines at the end of the configuration.
pub(crate) fn mecanum_with(more: &str) -> Plan {
    plan(&format!("{}\n{more}", include_str!("tray.toml")))
}

/// One link's drivers and their wheels.
pub(crate) struct Board {
    pub(crate) driver: Driver,
    pub(crate) identity: Identity,
    deframer: Deframer,
    angle: Vec<f64>,
    speed: Vec<f64>,
    /// Speed counts to angle counts a second.
    angle_rate: f64,
    /// Its own clock is this far ahead of ours.
    pub(crate) clock_ahead_us: u64,
    pub(crate) open: bool,
    pub(crate) openings: u32,
    /// It hears nothing.
    pub(crate) deaf: bool,
    /// It does not hear Clear.
    pub(crate) deaf_to_clear: bool,
    /// Nothing of it is heard.
    pub(crate) mute: bool,
    /// Added to the speeds that it reports, in counts.
    pub(crate) report_offset: Vec<f64>,
    /// Channels that turn at this speed (counts) whatever they are told.
    pub(crate) stuck: Vec<Option<f64>>,
    pub(crate) bits: u16,
    pub(crate) stop_input_open: bool,
    pub(crate) yaw_rate: Option<i16>,
    pub(crate) write_blocked: bool,
    pub(crate) unsent: Option<u16>,
    /// Lag of its wheels.
    pub(crate) lag_s: f64,
    heard: LinkInput,
}

impl Board {
    fn new(plan: &Plan, link: usize) -> Self {
        let own = &plan.links[link];
        let identity = Identity {
            version: 1,
            flags: flag::SIMULATED | flag::YAW_RATE | flag::STOP_INPUT,
            channels: own.channels,
            speed_lsb_urad_s: own.speed_lsb_urad_s,
            angle_lsb_urad: own.angle_lsb_urad,
            silence_ms: 1000,
            ramp_max_ms: 10_000,
            boot: 7,
            name: own.expect.parse().unwrap(),
        };
        let channels = usize::from(own.channels);
        Self {
            driver: Driver::new(identity.clone(), 0),
            deframer: Deframer::new(),
            angle: vec![0.0; channels],
            speed: vec![0.0; channels],
            angle_rate: f64::from(own.speed_lsb_urad_s) / f64::from(own.angle_lsb_urad),
            clock_ahead_us: 0,
            open: true,
            openings: 1,
            deaf: false,
            deaf_to_clear: false,
            mute: false,
            report_offset: vec![0.0; channels],
            stuck: vec![None; channels],
            bits: 0,
            stop_input_open: false,
            yaw_rate: Some(0),
            write_blocked: false,
            unsent: Some(0),
            lag_s: 0.01,
            heard: LinkInput::default(),
            identity,
        }
    }

    /// Power off and on.
    pub(crate) fn restart(&mut self, now_us: u64) {
        self.identity.boot = self.identity.boot.wrapping_add(1);
        self.driver = Driver::new(self.identity.clone(), now_us + self.clock_ahead_us);
        self.angle.iter_mut().for_each(|it| *it = 0.0);
    }

    pub(crate) fn set_angle(&mut self, channel: usize, counts: f64) {
        self.angle[channel] = counts;
    }

    pub(crate) fn speed_counts(&self, channel: usize) -> f64 {
        self.speed[channel]
    }

    fn measured(&self) -> Measured {
        let channels = self.angle.iter().zip(&self.speed).zip(&self.report_offset);
        Measured {
            channels: channels
                .map(|((angle, speed), offset)| ChannelState {
                    // Encoders wrap.
                    angle: angle.round() as i64 as i32,
                    speed: (speed + offset).round() as i16,
                })
                .collect(),
            supply_mv: 24_000,
            yaw_rate: self.yaw_rate,
            bits: self.bits,
            stop_input_open: self.stop_input_open,
        }
    }

    fn advance(&mut self, now_us: u64) {
        let clock_us = now_us + self.clock_ahead_us;
        let measured = self.measured();
        self.driver.advance(clock_us, &measured);
        let command = self.driver.command(clock_us);
        let dt = STEP_US as f64 * 1e-6;
        for (channel, told) in command.speeds.iter().enumerate() {
            let speed = &mut self.speed[channel];
            match self.stuck[channel] {
                Some(stuck) => *speed = stuck,
                None if command.torque => *speed += (f64::from(*told) - *speed) * (dt / self.lag_s).min(1.0),
                None => *speed *= 1.0 - dt / 0.2,
            }
            self.angle[channel] += *speed * dt * self.angle_rate;
        }
        let mut bytes = [0; MAX_ON_LINE];
        let n = self.driver.transmit(clock_us, &measured, &mut bytes);
        for byte in &bytes[..n] {
            if let Some(Ok(plain)) = self.deframer.push(*byte) {
                let (_, message) = parse_from_drivers(plain).unwrap();
                if !self.mute && self.open {
                    self.hear(message, now_us);
                }
            }
        }
    }

    fn hear(&mut self, message: FromDrivers, now_us: u64) {
        match message {
            FromDrivers::Identity(identity) => self.heard.identity = Some(identity),
            FromDrivers::Feedback(feedback) => {
                self.heard.status_seen |= feedback.status;
                self.heard.feedback = Some(Heard { at: Mono::from_ns(now_us * 1000), feedback });
            }
        }
    }

    fn input(&mut self) -> LinkInput {
        let heard = core::mem::take(&mut self.heard);
        LinkInput {
            open: self.open,
            openings: self.openings,
            unsent: self.unsent,
            write_blocked: self.write_blocked,
            ..heard
        }
    }

    fn receive(&mut self, sequence: u8, message: &ToDrivers, now_us: u64) {
        let deaf = self.deaf || (self.deaf_to_clear && matches!(message, ToDrivers::Clear { .. }));
        if deaf || !self.open {
            return;
        }
        let mut bytes = [0; MAX_ON_LINE];
        let n = emit_to_drivers(sequence, message, &mut bytes);
        for byte in &bytes[..n] {
            self.driver.receive(*byte, now_us + self.clock_ahead_us);
        }
    }
}

/// Four mecanum wheels with a validity that runs out late, so that the host's guards are seen alone.
pub(crate) fn patient_drivers() -> Plan {
    plan(&include_str!("tray.toml").replace("valid_ms = 100", "valid_ms = 900"))
}

/// All of it.
pub(crate) struct World {
    pub(crate) plan: Plan,
    pub(crate) core: Core,
    pub(crate) boards: Vec<Board>,
    pub(crate) pad: PadInput,
    /// The pad gives no sign of life.
    pub(crate) pad_silent: bool,
    pub(crate) console: ConsoleInput,
    pub(crate) quit: bool,
    pub(crate) stop_line: Option<Pull>,
    pulls: u32,
    pub(crate) now_us: u64,
    /// The tick wakes this much after it is due.
    pub(crate) late_us: u64,
    /// What the last tick saw and decided.
    pub(crate) inputs: Inputs,
    pub(crate) out: Outputs,
    pub(crate) events: Vec<Event>,
    /// Every tick, for playing it again.
    pub(crate) tape: Vec<(Inputs, Outputs)>,
}

impl World {
    pub(crate) fn new(plan: Plan) -> Self {
        let boards = (0..plan.links.len()).map(|link| Board::new(&plan, link)).collect();
        Self {
            core: Core::new(&plan),
            boards,
            pad: PadInput { present: true, ..PadInput::default() },
            pad_silent: false,
            console: ConsoleInput::default(),
            quit: false,
            stop_line: None,
            pulls: 0,
            now_us: 1_000_000,
            late_us: 0,
            inputs: Inputs::default(),
            out: Outputs::default(),
            events: Vec::new(),
            tape: Vec::new(),
            plan,
        }
    }

    pub(crate) fn period_us(&self) -> u64 {
        self.plan.tick.period_ns() / 1000
    }

    pub(crate) fn period_s(&self) -> f64 {
        self.plan.tick.period_s()
    }

    pub(crate) fn now_s(&self) -> f64 {
        self.now_us as f64 * 1e-6
    }

    /// Lets time pass for drivers and wheels alone, as when the program is suspended.
    pub(crate) fn let_pass(&mut self, us: u64) {
        let end = self.now_us + us;
        while self.now_us < end {
            self.now_us += STEP_US;
            for board in &mut self.boards {
                board.advance(self.now_us);
            }
        }
    }

    /// What the next tick would see.
    pub(crate) fn see(&mut self) -> Inputs {
        self.let_pass(self.period_us());
        if !self.pad_silent {
            self.pad.last_sign = Mono::from_ns(self.now_us * 1000);
        }
        let pad = if self.pad.present { self.pad } else { PadInput::default() };
        self.pad.pressed = Buttons::default();
        self.pad.hold_least = self.pad.hold;
        Inputs {
            now: Mono::from_ns((self.now_us + self.late_us) * 1000),
            due: Mono::from_ns(self.now_us * 1000),
            pad,
            links: self.boards.iter_mut().map(Board::input).collect(),
            console: core::mem::take(&mut self.console),
            quit: self.quit,
            stop_line: self.stop_line,
        }
    }

    pub(crate) fn tick(&mut self) -> &Outputs {
        let inputs = self.see();
        self.step(inputs)
    }

    pub(crate) fn step(&mut self, inputs: Inputs) -> &Outputs {
        let out = self.core.step(&inputs);
        self.promises(&out);
        if out.pull_stop {
            self.pull(Puller::Core);
            for (index, board) in self.boards.iter_mut().enumerate() {
                let stop = ToDrivers::Stop { ramp_ms: out.stop_ramp_ms };
                board.receive(out.stop_sequence[index], &stop, self.now_us);
            }
        }
        for frame in &out.frames {
            let motion = matches!(frame.message, ToDrivers::Drive(_));
            if motion && self.stop_line.is_some() {
                continue;
            }
            self.boards[usize::from(frame.link)].receive(frame.sequence, &frame.message, self.now_us);
        }
        if out.release_stop_line.is_some() && out.release_stop_line == self.stop_line.map(|it| it.number) {
            self.stop_line = None;
        }
        self.events.extend(out.events.iter().copied());
        self.tape.push((inputs.clone(), out.clone()));
        self.inputs = inputs;
        self.out = out;
        &self.out
    }

    /// Pulls the stop line, without writing.
    pub(crate) fn pull(&mut self, by: Puller) {
        self.pulls += 1;
        self.stop_line = Some(Pull { number: self.pulls, by });
    }

    /// What holds in every tick of every test.
    fn promises(&self, out: &Outputs) {
        promises(&self.plan, out);
    }

    pub(crate) fn ticks(&mut self, n: usize) {
        for _ in 0..n {
            self.tick();
        }
    }

    pub(crate) fn run_s(&mut self, s: f64) {
        self.ticks((s / self.period_s()).round() as usize);
    }

    /// Ticks until something is so; how long that took.
    pub(crate) fn until(&mut self, most_s: f64, what: &str, so: impl Fn(&Self) -> bool) -> f64 {
        let from = self.now_s();
        while !so(self) {
            assert!(self.now_s() - from < most_s, "{what}: not within {most_s} s; {:?}", self.out);
            self.tick();
        }
        self.now_s() - from
    }

    pub(crate) fn phase(&self) -> Phase {
        self.out.phase
    }

    /// The code of the cause that stands.
    pub(crate) fn cause(&self) -> &'static str {
        self.out.cause.as_ref().map_or("", |it| it.code())
    }

    pub(crate) fn press(&mut self, buttons: Buttons) {
        self.pad.down = self.pad.down.with(buttons);
        self.pad.pressed = self.pad.pressed.with(buttons);
    }

    pub(crate) fn let_go(&mut self, buttons: Buttons) {
        self.pad.down = self.pad.down.without(buttons);
    }

    /// A button pressed for one tick.
    pub(crate) fn tap(&mut self, buttons: Buttons) {
        self.press(buttons);
        self.tick();
        self.let_go(buttons);
    }

    pub(crate) fn hold(&mut self, value: f64) {
        self.pad.hold = value;
        self.pad.hold_least = self.pad.hold_least.min(value);
    }

    pub(crate) fn sticks(&mut self, x: f64, y: f64, turn: f64) {
        self.pad.sticks = Sticks { x, y, turn };
    }

    pub(crate) fn into_parked(mut self) -> Self {
        self.until(2.0, "nothing stands against Ready", |it| {
            it.phase() == Phase::Parked && it.out.view.waits_for.is_none() && !it.tape.is_empty()
        });
        self.ticks(3);
        self
    }

    pub(crate) fn into_ready(mut self) -> Self {
        self = self.into_parked();
        self.tap(Buttons::READY);
        assert_eq!(self.phase(), Phase::Ready, "{:?}", self.out);
        self.ticks(3);
        self
    }

    pub(crate) fn into_driving(mut self) -> Self {
        self = self.into_ready();
        self.hold(1.0);
        self.tick();
        assert_eq!(self.phase(), Phase::Driving, "{:?}", self.out);
        self
    }

    /// Driving with these sticks until the speed has settled.
    pub(crate) fn at_speed(mut self, x: f64, y: f64, turn: f64) -> Self {
        self = self.into_driving();
        self.sticks(x, y, turn);
        self.run_s(1.5);
        assert_eq!(self.phase(), Phase::Driving, "{:?}", self.out);
        self
    }

    pub(crate) fn into_stopping(mut self) -> Self {
        self = self.at_speed(1.0, 0.0, 0.0);
        self.hold(0.0);
        self.sticks(0.0, 0.0, 0.0);
        self.tick();
        assert_eq!(self.phase(), Phase::Stopping);
        self
    }

    /// Tripped by the console from Ready, latched and at rest.
    pub(crate) fn into_tripped(mut self) -> Self {
        self = self.into_ready();
        self.console.stop = true;
        self.tick();
        assert_eq!(self.phase(), Phase::Tripped);
        self.run_s(0.5);
        self
    }

    pub(crate) fn in_phase(plan: Plan, phase: Phase) -> Self {
        let world = Self::new(plan);
        match phase {
            Phase::Parked => world.into_parked(),
            Phase::Ready => world.into_ready(),
            Phase::Driving => world.at_speed(1.0, 0.0, 0.0),
            Phase::Stopping => world.into_stopping(),
            Phase::Tripped => world.into_tripped(),
        }
    }

    /// Holds the reset button until Parked or until it can't be.
    pub(crate) fn reset(&mut self) {
        self.press(Buttons::RESET);
        self.run_s(self.plan.guard.reset_hold_s + 0.7);
        self.let_go(Buttons::RESET);
        self.tick();
    }

    /// Some event was told since the events were last cleared.
    pub(crate) fn told(&self, it_is: impl Fn(&Event) -> bool) -> bool {
        self.events.iter().any(it_is)
    }
}

/// Wheels are told to turn only in Driving and Stopping; every frame fits its phase; no wheel is clamped alone.
pub(crate) fn promises(plan: &Plan, out: &Outputs) {
    let motion = matches!(out.phase, Phase::Driving | Phase::Stopping);
    for frame in &out.frames {
        let link = &plan.links[usize::from(frame.link)];
        match &frame.message {
            ToDrivers::Drive(drive) => {
                let mode = match out.phase {
                    Phase::Parked => Mode::Park,
                    Phase::Ready => Mode::Hold,
                    Phase::Driving | Phase::Stopping => Mode::Run,
                    Phase::Tripped => panic!("a Drive in Tripped"),
                };
                assert_eq!(drive.mode, mode);
                assert_eq!(drive.valid_ms, link.valid_ms);
                assert!(drive.ramp_ms >= 1);
                assert_eq!(drive.speeds.len(), usize::from(link.channels));
                assert!(motion || drive.speeds.iter().all(|it| *it == 0), "{:?} in {:?}", drive, out.phase);
            }
            ToDrivers::Clear { .. } => assert_eq!(out.phase, Phase::Tripped),
            ToDrivers::Ask => {}
            ToDrivers::Stop { .. } => panic!("stops go by the stop line"),
        }
    }
    assert_eq!(out.cause.is_some(), out.phase == Phase::Tripped);
    assert!(!out.pull_stop || out.phase == Phase::Tripped);
    assert!(
        out.release_stop_line.is_none() || out.phase != Phase::Tripped,
        "the stop line rests while tripped"
    );
    assert!(motion || out.view.sent_rad_s.iter().all(|it| *it == 0.0));
    assert_eq!(out.stop_sequence.len(), plan.links.len());
    let half_counts = plan.layout.wheel_speeds(out.view.sent);
    for ((exact, sent), wheel) in half_counts.iter().zip(&out.view.sent_rad_s).zip(&plan.wheels) {
        let lsb = f64::from(plan.links[wheel.link].speed_lsb_urad_s) * 1e-6 / wheel.gear;
        assert!((exact - sent).abs() <= lsb * 0.5000001, "{exact} sent as {sent}");
    }
}
