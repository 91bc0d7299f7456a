//! What people ask, phase by phase. Requests are edges: seen now or lost, never remembered.

use super::Core;
use super::event::{Event, Request, Wait, say};
use super::io::{Buttons, Inputs, Outputs, Phase};
use super::phase::Happening;
use super::step::{Seen, ms};
use crate::units::{Mono, s_to_ns};

impl Core {
    pub(super) fn parked(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        self.shaper.rest();
        if !inputs.pad.present || !inputs.pad.pressed.has(Buttons::READY) {
            return;
        }
        match self.ready_waits(inputs, seen) {
            Some(wait) => say(out, Event::Refused { request: Request::Ready, wait }),
            None => {
                self.state.guards.rest();
                self.state.sent.rest();
                self.enter_ready(inputs.now, Happening::Ready, out);
            }
        }
    }

    fn enter_ready(&mut self, now: Mono, happening: Happening, out: &mut Outputs) {
        self.state.ready_since = now;
        self.state.hold.spend();
        self.go(happening, out);
    }

    pub(super) fn ready(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        self.shaper.rest();
        // Edges only: a control that is stuck does not keep the torque on.
        if seen.hold.edge || (inputs.pad.present && inputs.pad.pressed != Buttons::default()) {
            self.state.ready_since = inputs.now;
        }
        let idle = inputs.now.since_ns(self.state.ready_since) >= self.settings.times.ready_idle_ns;
        if self.state.quitting.is_some() || idle {
            self.go(Happening::Park, out);
            return;
        }
        if !seen.hold.edge {
            self.state.hold.arm(seen.hold);
            return;
        }
        // Whatever becomes of it, this press is spent.
        let counts = self.state.hold.spend();
        let wait = if !counts {
            Wait::PressSpent
        } else if !seen.centred {
            Wait::SticksNotCentred
        } else {
            self.go(Happening::Press, out);
            return;
        };
        say(out, Event::Refused { request: Request::Press, wait });
    }

    pub(super) fn driving(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        let quiet = self.pad_quiet_ns(inputs);
        if !seen.hold.released && quiet.is_none() && self.state.quitting.is_none() {
            return;
        }
        if let Some(quiet) = quiet {
            say(out, Event::PadQuiet { quiet_ms: ms(quiet) });
        }
        // A stop goes on in the frame in which it begins. The wheels' limits of the other one, where a change was under
        // way, could make it longer than the budget says.
        self.shaper.request_frame(self.shaper.frame());
        let period_s = self.shaper.settings().period_s;
        let ramp_ns = s_to_ns(f64::from(self.shaper.ticks_to_rest()) * period_s);
        let allowed_ns = ramp_ns + self.settings.times.stop_margin_ns;
        self.state.stop_by = Some((inputs.now.plus_ns(allowed_ns), ms(allowed_ns)));
        self.go(Happening::Release, out);
    }

    pub(super) fn stopping(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        if seen.hold.edge {
            say(out, Event::Refused { request: Request::Press, wait: Wait::PressSpent });
        }
        if !self.shaper.at_rest() || !self.state.wheels.stands(inputs.now, &self.settings) {
            return;
        }
        self.state.stop_by = None;
        if self.state.quitting.is_some() {
            self.go(Happening::StoodToQuit, out);
        } else {
            self.enter_ready(inputs.now, Happening::Stood, out);
        }
    }

    /// The ramp for a stop by the drivers now: that of the faster of what is sent and what they may still be at. In
    /// Parked the base should stand; where it does not, it moves as somebody before us told it, and a ramp that is too
    /// short would take the torque off a base at speed.
    pub(super) fn ramp_ms(&self) -> u16 {
        if self.state.phase == Phase::Parked {
            return self.settings.longest_ramp_ms;
        }
        let settings = self.shaper.settings();
        let ramp_of = |twist| {
            let speeds = settings.layout.wheel_speeds(twist);
            let wheels = speeds.iter().zip(&settings.max_rad_s2).map(|(speed, most)| speed.abs() / most);
            super::settings::ramp_ms(&settings.limits, twist, wheels)
        };
        ramp_of(self.state.sent.newest()).max(ramp_of(self.state.sent.back(self.settings.driver_back)))
    }
}
