//! Faults begin and end: what they do to lines, drivers, wheels, host and hands, and what they may take.

use gripline::core::Phase;
use gripline::core::budget::Guard;
use gripline::core::io::Puller;
use gripline::core::settings::longest_ramp_ms;
use gripline::standin::fault::{Fault as SimFault, LinkFault, WheelFault, Which};
use gripline::units::s_to_ns;
use gripline::wire::{status, stop_on_line, stop_plain};

use super::{Drive, Happens};
use crate::faults::{Fault, Kind};
use crate::host::Host;
use crate::laws::Laws;
use crate::port::Port;
use crate::wheels::WheelWatch;

impl Drive<'_> {
    pub(super) fn begins(&mut self, index: usize) {
        let fault = self.faults[index];
        let in_motion = self.phase == Phase::Driving && self.commanded.iter().any(|it| *it != 0.0);
        let kind = Kind::ALL.iter().position(|it| *it == fault.kind).unwrap();
        self.report.faults.push((kind, in_motion));
        if self.tells {
            println!(
                "{:.4} {fault:?}, pace {}, left out: {:?}",
                self.now.ns() as f64 * 1e-9,
                self.pace,
                self.hands.left_out()
            );
        }
        self.hands.disturb();
        let hosted = self.host.is_some();
        let allowed = self.allowed(&fault);
        if impairs(fault.kind) {
            self.impaired = true;
            let (late_s, v) = (self.late_s(), self.budget.outermost_m_s(self.pace));
            let silent = self.budget.allowed(Guard::HostSilent, self.pace).later(late_s, v);
            self.slowest = self.slowest.slower(silent);
            if matches!(fault.kind, Kind::Hung | Kind::Suspended) {
                self.slowest = self.slowest.later(fault.for_s, v);
            }
        }
        self.strike(&fault);
        self.slowest = self.slowest.slower(allowed.unwrap_or_default());
        let slowest = self.slowest;
        self.standing.put_off(self.now, self.settled(slowest));
        if let (Some(guard), Some(_), 1) = (watched_by(fault.kind), allowed, self.faults.len()) {
            // Whether or not the drivers stop by themselves before.
            let row = self.budget.row(guard, self.pace);
            // Writing must fail for longer than a tick, which the tick after that sees.
            let refused_s = if fault.kind == Kind::Refused { 2.0 * row.tick_s } else { 0.0 };
            let by = self.now.plus_ns(s_to_ns(row.detect_s + row.tick_s + row.wire_s + refused_s));
            self.seen_by = Some((by, self.permission.grants));
        }
        if let Some(allowed) = allowed {
            let allowed = if self.faults.len() > 1 { self.slowest } else { allowed };
            let needs_reset =
                !matches!(fault.kind, Kind::HoldReleased | Kind::HoldDipped | Kind::PadSilent | Kind::Quit);
            if hosted {
                let begin = (self.path_m, self.permission.grants, needs_reset);
                self.standing.begin((fault.kind.name(), Some(index)), self.now, allowed, begin);
            }
        }
    }

    /// Makes it happen.
    fn strike(&mut self, fault: &Fault) {
        let now = self.now;
        let which = fault.link.map_or(Which::All, Which::One);
        let mut links = |it| self.sim.fault(SimFault::Link(which, it));
        match fault.kind {
            Kind::LineCut => links(LinkFault::Cut),
            Kind::Deaf => links(LinkFault::Deaf),
            Kind::Mute => links(LinkFault::Mute),
            Kind::Noise4 => links(LinkFault::Noisy(1e-4)),
            Kind::Noise3 => links(LinkFault::Noisy(1e-3)),
            Kind::Noise2 => links(LinkFault::Noisy(1e-2)),
            Kind::Restart => links(LinkFault::Restart),
            Kind::Latch => links(LinkFault::Latch),
            Kind::StopInput => {
                links(LinkFault::StopInput { open: true });
                // One that closes again at once is a latch like any other.
                self.permission.at_pad_only |= fault.for_s > 0.04;
            }
            Kind::FaultBits => {
                let bits =
                    [status::OVER_CURRENT, status::OVER_TEMPERATURE, status::UNDER_VOLTAGE, status::ENCODER];
                links(LinkFault::Bits(bits[(fault.value * 4.0) as usize]));
            }
            Kind::Stuck => self.wheel(fault, WheelFault::Stuck),
            Kind::Runaway => {
                let share =
                    if fault.value < 0.5 { fault.value * 1.6 + 0.1 } else { -(fault.value * 1.6 - 0.7) };
                self.wheel(fault, WheelFault::Runaway { share });
            }
            Kind::EncoderDead => self.wheel(fault, WheelFault::EncoderDead),
            Kind::Skid => {
                let factor = if fault.value < 0.5 { fault.value } else { 1.0 + fault.value };
                self.wheel(fault, WheelFault::Skid { factor });
            }
            Kind::Clogged => self.each_port(fault, |it| it.clog(true, now)),
            Kind::Refused => self.each_port(fault, |it| it.refuses = true),
            Kind::PortGone => {
                self.each_port(fault, Port::go);
                self.pull(Puller::LinkGone);
            }
            Kind::HoldReleased => self.hands.let_go(now.plus_ns(s_to_ns(0.02 + 0.3 * fault.value))),
            Kind::HoldDipped => self.hands.dip(),
            Kind::HoldSqueezed => self.hands.squeeze(),
            Kind::StopButton => {
                self.hands.press_stop();
                if self.pad_silent.is_none() && !self.pad_gone {
                    self.permission.at_pad_only = true;
                    self.pad_stop = true;
                    self.pull(Puller::PadStop);
                }
            }
            Kind::ConsoleStop => {
                self.asked_stop = true;
                self.pull(Puller::Console);
            }
            Kind::SecondSignal => self.pull(Puller::SecondSignal),
            Kind::PadUnplugged => {
                self.pad_gone = true;
                self.pull(Puller::PadGone);
            }
            Kind::PadSilent => {
                self.streams = fault.value < 0.5;
                self.pad_silent = Some(now);
            }
            Kind::Hung => self.hangs = Some(s_to_ns(fault.for_s)),
            Kind::Suspended => self.suspended = self.host.is_some(),
            Kind::Killed | Kind::KilledStop => {
                if fault.kind == Kind::KilledStop {
                    let stop = stop_on_line(stop_plain(0, longest_ramp_ms(self.budget.plan)));
                    for port in &mut self.ports {
                        port.discard_unsent();
                        port.write(now, &stop);
                    }
                }
                self.killed = Some(now);
                if self.host.take().is_some() && fault.value < 0.5 {
                    let back = now.plus_ns(s_to_ns(0.02 + fault.value));
                    self.to_come.push((back, Happens::Restarts));
                    self.to_come.sort_by_key(|it| core::cmp::Reverse(it.0));
                }
                self.suspended = false;
                self.wakes = None;
                self.hangs = None;
            }
            Kind::Quit => {
                if let Some(host) = &mut self.host {
                    host.inputs.quit = true;
                }
            }
        }
    }

    pub(super) fn ends(&mut self, index: usize) {
        let fault = self.faults[index];
        let now = self.now;
        let which = fault.link.map_or(Which::All, Which::One);
        match fault.kind {
            Kind::LineCut | Kind::Deaf | Kind::Mute | Kind::Noise4 | Kind::Noise3 | Kind::Noise2 => {
                self.sim.fault(SimFault::Link(which, LinkFault::Sound));
            }
            Kind::StopInput => {
                self.sim.fault(SimFault::Link(which, LinkFault::StopInput { open: false }));
            }
            Kind::FaultBits => self.sim.fault(SimFault::Link(which, LinkFault::Bits(0))),
            Kind::Clogged => self.each_port(&fault, |it| it.clog(false, now)),
            Kind::Refused => self.each_port(&fault, |it| it.refuses = false),
            Kind::PortGone => self.each_port(&fault, Port::come_back),
            Kind::PadUnplugged => self.pad_gone = false,
            Kind::PadSilent => (self.pad_silent, self.pad_frozen) = (None, None),
            Kind::Suspended => {
                if core::mem::take(&mut self.suspended)
                    && let Some(due) = self.missed.take()
                {
                    self.wakes = Some((due, now));
                    // Either of the two may be the first to run.
                    if self.chance.one_in(2)
                        && let Some(host) = &mut self.host
                    {
                        host.sentinel(now, &mut self.ports);
                    }
                }
            }
            // Wheels stay as they are, so that they are held against their rows to the end; the others are over at once.
            Kind::Stuck
            | Kind::Runaway
            | Kind::EncoderDead
            | Kind::Skid
            | Kind::HoldReleased
            | Kind::HoldDipped
            | Kind::HoldSqueezed
            | Kind::StopButton
            | Kind::ConsoleStop
            | Kind::SecondSignal
            | Kind::Restart
            | Kind::Latch
            | Kind::Hung
            | Kind::Killed
            | Kind::KilledStop
            | Kind::Quit => {}
        }
    }

    /// The service manager starts the program again.
    pub(super) fn restarts(&mut self) {
        let plan = self.budget.plan;
        // Drivers that have not yet missed it are stopped by the new one, which does not know how fast they are.
        let valid_s = self.budget.row(Guard::HostSilent, 0).detect_s + self.late_s();
        if self.killed.is_some_and(|it| self.now.since_s(it) < valid_s) {
            let last = plan.paces.len() - 1;
            let mut stop = self.settled(self.budget.allowed(Guard::DriverSays, last));
            if self.faults.len() > 1 {
                // Its stop may get through only just before the drivers would have missed it.
                let silent = self.budget.allowed(Guard::HostSilent, last).later(self.late_s(), 0.0);
                stop = stop.slower(self.settled(silent));
            }
            self.slowest = self.slowest.slower(stop);
            self.standing.put_off(self.now, stop);
        }
        self.host = Some(Host::new(plan));
        self.permission.start_again();
        self.phase = Phase::Parked;
        self.laws = Laws::new(plan);
        self.wheels = WheelWatch::new(plan, self.now);
        self.last_tick = None;
    }

    fn wheel(&mut self, fault: &Fault, what: WheelFault) {
        self.sim.fault(SimFault::Wheel(Which::One(fault.wheel), what));
        self.sound = false;
        self.dead[fault.wheel] |= what == WheelFault::EncoderDead;
    }

    fn each_port(&mut self, fault: &Fault, mut what: impl FnMut(&mut Port)) {
        for (link, port) in self.ports.iter_mut().enumerate() {
            if fault.link.is_none_or(|it| it == link) {
                what(port);
            }
        }
    }

    /// Threads other than the tick's pull the stop line, unless the whole process sleeps.
    fn pull(&mut self, by: Puller) {
        if let Some(host) = &mut self.host
            && !self.suspended
        {
            host.pull(by, self.now, &mut self.ports);
        }
    }
}

/// The guard of the host that is there for a line's fault, whatever the drivers do.
fn watched_by(kind: Kind) -> Option<Guard> {
    if matches!(kind, Kind::Deaf | Kind::Clogged) {
        Some(Guard::NotHeard)
    } else if matches!(kind, Kind::LineCut | Kind::Mute) {
        Some(Guard::FeedbackQuiet)
    } else if matches!(kind, Kind::Refused | Kind::PortGone) {
        // Within a tick or two.
        Some(Guard::PadGone)
    } else if matches!(kind, Kind::Restart | Kind::FaultBits | Kind::Latch) {
        Some(Guard::DriverSays)
    } else {
        None
    }
}

/// Whether a stop by the host may not reach the drivers while it stands.
fn impairs(kind: Kind) -> bool {
    matches!(
        kind,
        Kind::LineCut
            | Kind::Deaf
            | Kind::Mute
            | Kind::Clogged
            | Kind::Refused
            | Kind::PortGone
            | Kind::Noise4
            | Kind::Noise3
            | Kind::Noise2
            | Kind::Hung
            | Kind::Killed
            | Kind::KilledStop
            | Kind::Suspended
    )
}
