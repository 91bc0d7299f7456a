//! One drive: a random base, random hands, random faults, and everything that must hold.

mod allowance;
mod strike;

use gripline::base::PerWheel;
use gripline::config::StopCategory;
use gripline::core::budget::Guard;
use gripline::core::io::{Buttons, ConsoleInput, PadInput};
use gripline::core::{Cause, Event, Phase};
use gripline::standin::sim::Sim;
use gripline::units::{Mono, s_to_ns};

use crate::bases::{Base, STRETCH_NS};
use crate::chance::Chance;
use crate::faults::{self, Allowed, Budget, Fault};
use crate::hands::{Hands, LeftOut};
use crate::host::Host;
use crate::law;
use crate::laws::Laws;
use crate::permission::Permission;
use crate::port::Port;
use crate::standing::{Motion, Standing};
use crate::wheels::WheelWatch;

const PERIOD_NS: u64 = 10_000_000;
/// How long a faster pace than the one in force is remembered: frames and ramps of then may still be under way.
const PACE_KEPT_NS: u64 = 300_000_000;

/// What became of a drive.
#[derive(Clone, Debug, Default, PartialEq)]
pub(crate) struct Report {
    /// The kinds that were met, and whether the base was being driven.
    pub(crate) faults: Vec<(usize, bool)>,
    /// Codes of the causes of trips.
    pub(crate) trips: Vec<&'static str>,
    pub(crate) ticks: u32,
    pub(crate) moved: bool,
    pub(crate) moved_again: bool,
    pub(crate) nothing_left_out: bool,
    /// A number that two runs of the same drive share.
    pub(crate) digest: u64,
}

/// Something that happens at a moment.
#[derive(Clone, Copy, Debug)]
enum Happens {
    Begins(usize),
    Ends(usize),
    Restarts,
}

pub(crate) struct Drive<'a> {
    budget: Budget<'a>,
    chance: Chance,
    sim: Sim,
    ports: Vec<Port>,
    host: Option<Host>,
    hands: Hands,
    laws: Laws,
    permission: Permission,
    standing: Standing,
    wheels: WheelWatch,
    faults: Vec<Fault>,
    to_come: Vec<(Mono, Happens)>,
    now: Mono,
    phase: Phase,
    wait: bool,
    pad_gone: bool,
    /// Since when it gives no sign of life, and what it showed last.
    pad_silent: Option<Mono>,
    pad_frozen: Option<PadInput>,
    streams: bool,
    last_pad: PadInput,
    pad_stop: bool,
    asked_stop: bool,
    /// The next tick hangs for so long.
    hangs: Option<u64>,
    /// A tick that was due then wakes then.
    wakes: Option<(Mono, Mono)>,
    suspended: bool,
    missed: Option<Mono>,
    last_tick: Option<Mono>,
    /// Lines or host are not what they should be.
    impaired: bool,
    /// A cause stands that takes the torque off at once.
    may_coast: bool,
    coasts: bool,
    killed: Option<Mono>,
    /// When the host must have seen the one fault, and how often the base had been allowed to move before it.
    seen_by: Option<(Mono, u32)>,
    sound: bool,
    dead: Vec<bool>,
    slowest: Allowed,
    pace: usize,
    pace_since: Mono,
    path_m: f64,
    speed_m_s: Option<f64>,
    commanded: PerWheel<f64>,
    report: Report,
    /// Tell every tick: for the one drive that is run again.
    tells: bool,
}

/// Runs the drive of a seed on its base.
pub(crate) fn run(seed: u64, base: &Base, tells: bool) -> Result<Report, String> {
    let mut chance = Chance::new(seed, 2);
    let lasts_s = 2.0 + 6.0 * chance.even().powi(3);
    let start = Mono::from_ns(1_000_000_000 + chance.bits() % 1_000_000_000);
    let mut drive = Drive::new(seed, base, chance, start, lasts_s);
    drive.tells = tells;
    drive.sim.step(start);
    let ticks = (lasts_s * 1e9) as u64 / PERIOD_NS;
    for tick in 1..=ticks {
        let due = start.plus_ns(tick * PERIOD_NS);
        drive.advance(Mono::from_ns(due.ns() - PERIOD_NS + STRETCH_NS))?;
        drive.advance(due)?;
        drive.due(due)?;
    }
    drive.report.nothing_left_out = drive.hands.left_out() == LeftOut::Nothing;
    drive.report.ticks = u32::try_from(ticks).unwrap();
    let truth = drive.sim.truth();
    drive.note(truth.pose.x_m.to_bits() ^ truth.pose.heading_rad.to_bits());
    Ok(drive.report)
}

impl<'a> Drive<'a> {
    fn new(seed: u64, base: &'a Base, mut chance: Chance, now: Mono, lasts_s: f64) -> Self {
        let plan = &base.plan;
        let budget = Budget { plan, rows: &base.rows };
        let faults = faults::draw(&mut chance, plan, lasts_s);
        let mut to_come = Vec::new();
        for (index, fault) in faults.iter().enumerate() {
            let at = now.plus_ns(s_to_ns(fault.at_s));
            to_come.push((at, Happens::Begins(index)));
            to_come.push((at.plus_ns(s_to_ns(fault.for_s)), Happens::Ends(index)));
        }
        // The next one stands last.
        to_come.sort_by_key(|it| core::cmp::Reverse(it.0));
        let counts = chance.one_in(2);
        // All that the budget gives a line, less the coarseness of this simulation.
        let most_s = budget.row(Guard::StopAsked, 0).wire_s - 1e-9 * STRETCH_NS as f64;
        let ports =
            plan.links.iter().map(|_| Port::new(s_to_ns(chance.within(0.0, most_s.max(0.0))), counts));
        let ports = ports.collect();
        let streams = chance.one_in(2);
        let initial = Allowed { command_s: 0.0, rest_s: 0.0, distance_m: f64::INFINITY };
        let mut standing = Standing::default();
        standing.begin(("the start of the program", None), now, initial, (0.0, 0, true));
        Self {
            sim: Sim::new(plan, seed, base.sim.clone()),
            ports,
            host: Some(Host::new(plan)),
            hands: Hands::new(Chance::new(seed, 3), plan),
            laws: Laws::new(plan),
            permission: Permission::new(),
            standing,
            wheels: WheelWatch::new(plan, now),
            faults,
            to_come,
            now,
            phase: Phase::Parked,
            wait: true,
            pad_gone: false,
            pad_silent: None,
            pad_frozen: None,
            streams,
            last_pad: PadInput::default(),
            pad_stop: false,
            asked_stop: false,
            hangs: None,
            wakes: None,
            suspended: false,
            missed: None,
            last_tick: None,
            impaired: false,
            may_coast: false,
            coasts: false,
            killed: None,
            seen_by: None,
            sound: true,
            dead: vec![false; plan.wheels.len()],
            slowest: Allowed::default(),
            pace: 0,
            pace_since: now,
            path_m: 0.0,
            speed_m_s: None,
            commanded: plan.wheels.iter().map(|_| 0.0).collect(),
            report: Report::default(),
            tells: false,
            budget,
            chance,
        }
    }

    /// Lets time pass until `to`, with all that happens meanwhile.
    fn advance(&mut self, to: Mono) -> Result<(), String> {
        while let Some((at, happens)) = self.to_come.pop_if(|it| it.0 <= to) {
            self.sim.step(at);
            self.now = at;
            match happens {
                Happens::Begins(index) => self.begins(index),
                Happens::Ends(index) => self.ends(index),
                Happens::Restarts => self.restarts(),
            }
        }
        self.sim.step(to);
        self.now = to;
        for (link, port) in self.ports.iter_mut().enumerate() {
            port.deliver(to, link, &mut self.sim);
            match &mut self.host {
                Some(host) if !self.suspended => host.read(to, link, port, &mut self.sim),
                Some(_) => {}
                None => self.sim.bytes_out(link, &mut Vec::new()),
            }
        }
        self.look()?;
        self.wake()
    }

    /// The base at this moment.
    fn look(&mut self) -> Result<(), String> {
        let plan = self.budget.plan;
        self.commanded = self.sim.commanded_rad_s();
        let commanded = self.commanded.iter().any(|it| *it != 0.0);
        self.report.moved |= commanded;
        self.report.moved_again |=
            commanded && self.report.faults.len() == self.faults.len() && self.permission.grants > 1;
        self.note(self.commanded.iter().fold(0, |sum, it| sum ^ it.to_bits()));
        if self.sound && !self.standing.expects() {
            self.speed_m_s = None;
            return Ok(());
        }
        let truth = self.sim.truth();
        let [length, width] = plan.outline_m;
        let speed_m_s = truth.twist.travel_m_s() + truth.twist.turn_rad_s.abs() * length.hypot(width) / 2.0;
        self.path_m += (speed_m_s + self.speed_m_s.unwrap_or(speed_m_s)) / 2.0 * 1e-9 * STRETCH_NS as f64;
        self.speed_m_s = Some(speed_m_s);
        let turning =
            |(speed, wheel): (&f64, &gripline::config::WheelPlan)| speed.abs() > 0.01 * wheel.max_rad_s;
        let motion = Motion {
            commanded,
            turns: truth.wheel_rad_s.iter().zip(&plan.wheels).any(turning),
            sound: self.sound,
            // Links that stop apart turn the base, of which the budget tells by itself.
            alone: self.faults.len() == 1 && plan.links.len() == 1,
            path_m: self.path_m,
        };
        self.standing.look(self.now, motion, &mut self.permission)?;
        if !self.sound && !self.impaired && self.host.is_some() {
            self.wheels.look(self.now, &self.budget, self.pace, &truth, &self.dead)?;
        }
        Ok(())
    }

    /// Ticks that woke late, and the sentinel beside them.
    fn wake(&mut self) -> Result<(), String> {
        if self.suspended {
            return Ok(());
        }
        if let Some(host) = &mut self.host
            && self.last_tick != Some(self.now)
        {
            host.sentinel(self.now, &mut self.ports);
        }
        if let Some((due, _)) = self.wakes.filter(|it| self.now >= it.1) {
            self.wakes = None;
            self.tick(due)?;
        }
        Ok(())
    }

    /// A tick is due now.
    fn due(&mut self, due: Mono) -> Result<(), String> {
        if self.suspended {
            self.missed = self.missed.or(Some(due));
            return Ok(());
        }
        if self.wakes.is_some() || self.last_tick == Some(due) {
            return Ok(());
        }
        if let Some(hangs_ns) = self.hangs.take() {
            self.wakes = Some((due, due.plus_ns(hangs_ns)));
            return Ok(());
        }
        self.tick(due)
    }

    fn tick(&mut self, due: Mono) -> Result<(), String> {
        let Some(host) = &mut self.host else { return Ok(()) };
        let plan = self.budget.plan;
        self.last_tick = Some(self.now);
        let (mut pad, mut console) = self.hands.play(self.now, plan, self.phase, self.wait);
        pad.streams = self.streams;
        if core::mem::take(&mut self.pad_stop) {
            pad.pressed = pad.pressed.with(Buttons::STOP);
        }
        console.stop |= core::mem::take(&mut self.asked_stop);
        match (self.pad_silent, self.pad_frozen) {
            (Some(_), Some(frozen)) => pad = PadInput { pressed: Buttons::default(), ..frozen },
            // What the hands did until then still came through.
            (Some(last_sign), None) => {
                pad.last_sign = last_sign;
                self.pad_frozen = Some(PadInput { hold_least: pad.hold, ..pad });
            }
            (None, _) => {}
        }
        if self.pad_gone {
            pad = PadInput::default();
        }
        self.last_pad = pad;
        let console = ConsoleInput { reset: console.reset && plan.console.reset, ..console };
        self.permission.watch(self.now, plan, self.phase, &pad, console);
        host.tick((self.now, due), pad, console, &mut self.ports);
        let out = &host.out;
        let before = core::mem::replace(&mut self.phase, out.phase);
        self.wait = out.view.waits_for.is_some();
        self.wheels.tell(self.now, out);
        self.permission.hear(out.phase, before != Phase::Tripped && out.phase == Phase::Tripped);
        let row = self.budget.row(Guard::Release, self.pace);
        let stop_s = row.ramp_s.unwrap() + row.smoothing_s + plan.guard.stop_margin_s + 0.02;
        self.laws.look(plan, out, stop_s)?;
        let unseen =
            self.seen_by.is_some_and(|(by, grants)| self.now > by && grants == self.permission.grants);
        law!(
            !unseen || out.phase != Phase::Driving,
            "{}: the host has not seen it",
            self.faults[0].kind.name()
        );
        law!(out.phase != Phase::Driving || self.permission.given(), "it drives and nobody has allowed it");
        for event in &out.events {
            if let Event::Trip(cause) = event {
                self.report.trips.push(cause.code());
                let asked =
                    matches!(cause, Cause::StopAsked(_)) && plan.guard.stop_category == StopCategory::Zero;
                self.may_coast |= asked || matches!(cause, Cause::Runaway { .. } | Cause::NotSlowing { .. });
                let quiet = self.report.faults.is_empty();
                law!(!quiet, "a sound base trips: {cause:?}");
            }
        }
        if self.tells {
            println!(
                "{:.4} {:?} pace {} {:?} hold {:.2} down {:#x} sent {:.3?} told {:.2?} pull {} ramp {} {:?} skid {:.3}",
                self.now.ns() as f64 * 1e-9,
                out.phase,
                out.view.pace,
                out.view.frame,
                self.last_pad.hold,
                self.last_pad.down.0,
                (out.view.sent.turn_rad_s, out.view.sent.x_m_s, out.view.sent.y_m_s),
                self.commanded,
                out.pull_stop,
                out.stop_ramp_ms,
                out.events,
                out.view.skid_rad_s,
            );
        }
        self.may_coast &= out.phase == Phase::Tripped;
        let (finished, zero) = (out.finished, out.stop_ramp_ms == 0);
        law!(!zero || self.may_coast, "the torque goes off at once for {:?}", out.cause);
        self.remember_pace();
        self.stopped(before);
        let coasted = core::mem::replace(&mut self.coasts, zero);
        if zero && !coasted {
            let rolls_s = self.budget.roll_out_s(self.pace);
            let rolls = Allowed { rest_s: rolls_s, distance_m: f64::INFINITY, ..Allowed::default() };
            self.standing.put_off(self.now, self.settled(rolls));
        }
        if finished {
            self.host = None;
        }
        Ok(())
    }

    fn note(&mut self, bits: u64) {
        self.report.digest = (self.report.digest ^ bits).wrapping_mul(0x0100_0000_01b3).rotate_left(7);
    }
}
