//! What goes out in a tick. It follows from the phase alone.

use super::Core;
use super::event::{Event, say};
use super::io::{Inputs, Outgoing, Outputs, Phase};
use super::link::Link;
use super::sent;
use crate::units::Mono;
use crate::wire::{Drive, Mode, ToDrivers};

/// A Clear that was not taken is repeated.
const CLEAR_EVERY_NS: u64 = 40_000_000;

impl Core {
    pub(super) fn send(&mut self, inputs: &Inputs, out: &mut Outputs) {
        let layout = &self.shaper.settings().layout;
        let (counts, back) = sent::counts(&self.settings, &layout.wheel_speeds(self.state.sent.newest()));
        out.stop_ramp_ms = self.stop_ramp_ms();
        let clearing = self.state.tripped() && self.state.clearing.is_some();
        let stopping = self.state.tripped() && !clearing;
        out.pull_stop |= stopping && self.state.links.iter().any(|link| link.open && !link.latched());
        self.let_stop_line_rest(inputs, out);
        let mode = match self.state.phase {
            Phase::Parked => Some(Mode::Park),
            Phase::Ready => Some(Mode::Hold),
            Phase::Driving | Phase::Stopping => Some(Mode::Run),
            Phase::Tripped => None,
        };
        let in_flight = self.settings.in_flight();
        for (index, (link, own)) in (0_u8..).zip(self.state.links.iter_mut().zip(&self.settings.links)) {
            if out.pull_stop {
                // The stop carries this one; the frames of this tick follow it.
                out.stop_sequence.push(link.sequence);
                if link.open {
                    link.send(inputs.now);
                }
            }
            let mut put = |sequence, message| {
                let _ = out.frames.try_push(Outgoing { link: index, sequence, message });
            };
            if link.ask_due(inputs.now) {
                put(link.send(inputs.now), ToDrivers::Ask);
            }
            if clearing && let Some(token) = clear_due(link, inputs.now) {
                put(link.send(inputs.now), ToDrivers::Clear { token });
            }
            // A Park would take the torque off drivers that somebody else left at speed, so they are heard first.
            let Some(mode) = mode.filter(|_| link.as_planned() && link.heard.is_some()) else {
                link.pause();
                continue;
            };
            let at = usize::from(index);
            let unsent = inputs.links.get(at).and_then(|it| it.unsent);
            if !link.has_room(inputs.now, unsent, in_flight) {
                if link.skip() {
                    say(out, Event::SendSkipped { link: index });
                }
                continue;
            }
            let speeds = match mode {
                Mode::Run => sent::channels(&self.settings, at, Some(&counts)),
                Mode::Park | Mode::Hold => sent::channels(&self.settings, at, None),
            };
            let ramp_ms = out.stop_ramp_ms;
            let drive = Drive { mode, valid_ms: own.valid_ms, ramp_ms, speeds };
            put(link.send_drive(inputs.now), ToDrivers::Drive(drive));
        }
        if !out.pull_stop {
            // A stop pulled before the next tick goes on after what was just sent.
            out.stop_sequence = self.state.links.iter().map(|link| link.sequence).collect();
        }
        out.view.sent_rad_s = back;
        out.view.sent_counts = counts;
    }

    /// The ramp of a stop at this moment: of the one that goes on, or of one that may be pulled before the next tick.
    fn stop_ramp_ms(&self) -> u16 {
        match &self.state.driver_stop {
            Some(stop) if self.state.tripped() => stop.ramp_ms,
            Some(_) | None => self.ramp_ms(),
        }
    }

    /// Outside Tripped every pull that was looked at has been answered by a reset.
    fn let_stop_line_rest(&self, inputs: &Inputs, out: &mut Outputs) {
        if !self.state.tripped() {
            out.release_stop_line =
                inputs.stop_line.map(|it| it.number).filter(|number| self.state.pull_seen == Some(*number));
        }
    }
}

/// The token for a Clear, where one is due.
fn clear_due(link: &mut Link, now: Mono) -> Option<u16> {
    let due = link.cleared.is_none_or(|sent| now.since_ns(sent) >= CLEAR_EVERY_NS);
    if !due || !link.latched() {
        return None;
    }
    link.cleared = Some(now);
    link.heard.as_ref().map(|(_, feedback)| feedback.token)
}
