//! Out of Tripped: reset, Clear, and what stands against them and against Ready.

use super::event::{Event, IdentityField, Request, Wait, say};
use super::io::{Buttons, Inputs, Outputs};
use super::link::{Known, Link, any_yaw_rate};
use super::phase::Happening;
use super::step::Seen;
use super::{Cause, Core};
use crate::units::Mono;
use crate::wire::status;

/// All links must have unlatched this long after a reset.
const CLEAR_WITHIN_NS: u64 = 500_000_000;

impl Core {
    pub(super) fn tripped(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        self.shaper.rest();
        if let Some(since) = self.state.clearing {
            self.clear(since, inputs, out);
            return;
        }
        if inputs.pad.present && inputs.pad.pressed.has(Buttons::READY) {
            say(out, Event::Refused { request: Request::Ready, wait: Wait::WrongPhase });
        }
        let at_console = inputs.console.reset && !self.state.reset_at_pad;
        let refused = if self.reset_at_pad(inputs, seen) || at_console {
            self.reset_waits(inputs, seen)
        } else if inputs.console.reset {
            Some(Wait::ResetAtPad)
        } else {
            return;
        };
        self.state.reset_since = None;
        match refused {
            Some(wait) => say(out, Event::Refused { request: Request::Reset, wait }),
            None => {
                self.state.clearing = Some(inputs.now);
                self.state.links.iter_mut().for_each(|link| link.cleared = None);
            }
        }
    }

    /// The button was pressed in Tripped and held long enough, or held while the hold control is down, which is
    /// refused at once.
    fn reset_at_pad(&mut self, inputs: &Inputs, seen: &Seen) -> bool {
        let pad = &inputs.pad;
        if pad.present && pad.pressed.has(Buttons::RESET) {
            self.state.reset_since = Some(inputs.now);
        }
        if !pad.present || !pad.down.has(Buttons::RESET) {
            self.state.reset_since = None;
        }
        let long = self.settings.times.reset_hold_ns;
        self.state.reset_since.is_some_and(|since| seen.hold.pressed || inputs.now.since_ns(since) >= long)
    }

    /// Waits for every link to unlatch after a reset.
    fn clear(&mut self, since: Mono, inputs: &Inputs, out: &mut Outputs) {
        if self.state.links.iter().all(Link::unlatched) {
            self.state.clearing = None;
            self.state.cause = None;
            self.state.reset_at_pad = false;
            self.state.driver_stop = None;
            self.state.sent.rest();
            self.go(Happening::Cleared, out);
        } else if inputs.now.since_ns(since) > CLEAR_WITHIN_NS {
            let link = self.state.links.iter().position(|it| !it.unlatched()).unwrap_or(0);
            self.trip(Cause::NotCleared { link: u8::try_from(link).unwrap_or(0) }, inputs.now, out);
        }
    }

    /// What Ready waits for.
    pub(super) fn ready_waits(&self, inputs: &Inputs, seen: &Seen) -> Option<Wait> {
        self.stands_against(inputs, seen).or_else(|| {
            self.first_link(|link| link.latched().then_some(())).map(|(link, ())| Wait::Latched { link })
        })
    }

    /// What a reset waits for. While torque is on a ramp is not over, and a Clear would be refused.
    pub(super) fn reset_waits(&self, inputs: &Inputs, seen: &Seen) -> Option<Wait> {
        let stands = self.state.wheels.stands(inputs.now, &self.settings);
        let torque = self.state.links.iter().any(|link| link.status() & status::TORQUE_ON != 0);
        self.stands_against(inputs, seen)
            .or_else(|| (!stands || torque).then_some(Wait::NotStanding))
            .or_else(|| {
                self.first_link(|link| (!link.latched()).then_some(()))
                    .map(|(link, ())| Wait::NotLatched { link })
            })
    }

    /// What stands against both, in the order in which a person would mend it.
    fn stands_against(&self, inputs: &Inputs, seen: &Seen) -> Option<Wait> {
        if self.state.quitting.is_some() {
            return Some(Wait::Quitting);
        }
        if !inputs.pad.present {
            return Some(Wait::NoPad);
        }
        if let Some(wait) =
            (0_u8..).zip(&self.state.links).find_map(|(it, link)| self.link_waits(it, link, inputs.now))
        {
            return Some(wait);
        }
        if self.settings.gyro && !any_yaw_rate(self.state.links.iter()) {
            return Some(Wait::IdentityDiffers { link: 0, field: IdentityField::YawRate });
        }
        if inputs.pad.down.has(Buttons::STOP) {
            return Some(Wait::StopDown);
        }
        if seen.hold.pressed {
            return Some(Wait::HoldNotReleased);
        }
        (!seen.centred).then_some(Wait::SticksNotCentred)
    }

    /// What keeps a link from being used, apart from a latch.
    fn link_waits(&self, index: u8, link: &Link, now: Mono) -> Option<Wait> {
        if !link.open {
            return Some(Wait::LinkNotOpen { link: index });
        }
        match &link.known {
            Known::Nothing => return Some(Wait::NoIdentity { link: index }),
            Known::Differs(field) => return Some(Wait::IdentityDiffers { link: index, field: *field }),
            Known::AsPlanned(_) => {}
        }
        let quiet_ns = self.settings.times.feedback_quiet_ns;
        if link.feedback_age_ns(now).is_none_or(|age| age > quiet_ns) {
            return Some(Wait::NoFeedback { link: index });
        }
        let bits = link.status();
        if bits & status::FAULTS != 0 {
            return Some(Wait::Fault { link: index, status: bits });
        }
        (bits & status::STOP_INPUT_OPEN != 0).then_some(Wait::StopInputOpen { link: index })
    }

    /// The first link of which something is the case.
    fn first_link<T>(&self, it_is: impl Fn(&Link) -> Option<T>) -> Option<(u8, T)> {
        (0_u8..).zip(&self.state.links).find_map(|(index, link)| it_is(link).map(|it| (index, it)))
    }
}
