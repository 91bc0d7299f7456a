//! The host without threads: what the shell does round a step, the stop line, and the sentinel.

use gripline::config::Plan;
use gripline::core::io::{ConsoleInput, Heard, LinkInput, PadInput, Pull, Puller};
use gripline::core::{Core, Inputs, Outputs};
use gripline::standin::sim::Sim;
use gripline::units::{Mono, s_to_ns};
use gripline::wire::{
    Deframer, FromDrivers, MAX_ON_LINE, Mode, ToDrivers, emit_to_drivers, parse_from_drivers, stop_on_line,
    stop_plain,
};

use crate::port::Port;

#[derive(Debug)]
pub(crate) struct Host {
    core: Core,
    pub(crate) inputs: Inputs,
    pub(crate) out: Outputs,
    deframers: Vec<Deframer>,
    stop: Option<Pull>,
    pulls: u32,
    /// Sequence and ramp that a stop must carry, a link.
    armed: Vec<(u8, u16)>,
    /// When the last tick ended.
    pulse: Option<Mono>,
    late_ns: u64,
    sentinel_pulled: bool,
    heard: Vec<u8>,
}

impl Host {
    pub(crate) fn new(plan: &Plan) -> Self {
        let links = plan.links.len();
        let inputs =
            Inputs { links: (0..links).map(|_| LinkInput::default()).collect(), ..Inputs::default() };
        Self {
            core: Core::new(plan),
            inputs,
            out: Outputs::default(),
            deframers: (0..links).map(|_| Deframer::new()).collect(),
            stop: None,
            pulls: 0,
            armed: vec![(0, 1); links],
            pulse: None,
            late_ns: s_to_ns(plan.guard.late_ms * 1e-3),
            sentinel_pulled: false,
            heard: Vec::new(),
        }
    }

    /// What a reader thread does: bytes to frames, frames to what the next tick sees.
    pub(crate) fn read(&mut self, now: Mono, link: usize, port: &Port, sim: &mut Sim) {
        self.heard.clear();
        sim.bytes_out(link, &mut self.heard);
        if !port.open {
            return;
        }
        let input = &mut self.inputs.links[link];
        for byte in &self.heard {
            let message = match self.deframers[link].push(*byte) {
                None => continue,
                Some(Ok(plain)) => parse_from_drivers(plain),
                Some(Err(lost)) => Err(lost),
            };
            match message {
                Ok((_, FromDrivers::Identity(identity))) => input.identity = Some(identity),
                Ok((_, FromDrivers::Feedback(feedback))) => {
                    input.status_seen |= feedback.status;
                    input.feedback = Some(Heard { at: now, feedback });
                }
                Err(_) => input.dropped += 1,
            }
        }
    }

    /// One tick.
    pub(crate) fn tick(
        &mut self,
        (now, due): (Mono, Mono),
        pad: PadInput,
        console: ConsoleInput,
        ports: &mut [Port],
    ) {
        self.inputs.now = now;
        self.inputs.due = due;
        self.inputs.pad = pad;
        self.inputs.console = console;
        self.inputs.stop_line = self.stop;
        for (input, port) in self.inputs.links.iter_mut().zip(ports.iter()) {
            if !port.open || input.openings != port.openings {
                *input = LinkInput {
                    open: port.open,
                    openings: port.openings,
                    dropped: input.dropped,
                    ..LinkInput::default()
                };
            }
            input.unsent = port.unsent();
        }
        self.out = self.core.step(&self.inputs);
        self.act(now, ports);
        for input in &mut self.inputs.links {
            input.identity = None;
            input.feedback = None;
            input.status_seen = 0;
        }
        self.pulse = Some(now);
        self.sentinel_pulled = false;
    }

    /// The stop line first, then frames.
    fn act(&mut self, now: Mono, ports: &mut [Port]) {
        for (armed, sequence) in self.armed.iter_mut().zip(&self.out.stop_sequence) {
            *armed = (*sequence, self.out.stop_ramp_ms);
        }
        if self.out.pull_stop {
            if self.stop.is_some() {
                self.write_stop(now, ports);
            } else {
                self.pull(Puller::Core, now, ports);
            }
        }
        if self.out.release_stop_line.is_some() && self.out.release_stop_line == self.stop.map(|it| it.number)
        {
            self.stop = None;
        }
        self.inputs.links.iter_mut().for_each(|it| it.write_blocked = false);
        for frame in &self.out.frames {
            let link = usize::from(frame.link);
            let motion = matches!(&frame.message, ToDrivers::Drive(it) if it.mode != Mode::Park);
            if motion && self.stop.is_some() {
                continue;
            }
            let mut bytes = [0; MAX_ON_LINE];
            let length = emit_to_drivers(frame.sequence, &frame.message, &mut bytes);
            if !ports[link].write(now, &bytes[..length]) {
                self.inputs.links[link].write_blocked = true;
            }
        }
    }

    /// Any thread pulls the stop line.
    pub(crate) fn pull(&mut self, by: Puller, now: Mono, ports: &mut [Port]) {
        self.pulls += 1;
        self.stop = Some(Pull { number: self.pulls, by });
        self.write_stop(now, ports);
    }

    fn write_stop(&mut self, now: Mono, ports: &mut [Port]) {
        for (port, (sequence, ramp_ms)) in ports.iter_mut().zip(&self.armed) {
            port.discard_unsent();
            port.write(now, &stop_on_line(stop_plain(*sequence, *ramp_ms)));
        }
    }

    /// The sentinel looks: pulls once the tick is late, and again until it comes.
    pub(crate) fn sentinel(&mut self, now: Mono, ports: &mut [Port]) {
        if self.pulse.is_some_and(|last| now.since_ns(last) > self.late_ns) {
            if self.sentinel_pulled {
                self.write_stop(now, ports);
            } else {
                self.sentinel_pulled = true;
                self.pull(Puller::Sentinel, now, ports);
            }
        }
    }
}
