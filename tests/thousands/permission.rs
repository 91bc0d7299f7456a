//! What a person has to do before the base may move, written down a second time and without the core: after a trip
//! reset, then ready, then release and press; after a stop by the host release and press. Whatever is not in that
//! order does not count.

use gripline::config::Plan;
use gripline::core::Phase;
use gripline::core::io::{Buttons, ConsoleInput, PadInput};
use gripline::shaping::Sticks;
use gripline::units::{Mono, s_to_ns};

/// What is still missing.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Missing {
    Reset,
    Ready,
    Release,
    Press,
    Nothing,
}

#[derive(Debug)]
pub(crate) struct Permission {
    missing: Missing,
    /// How often the base was allowed to move.
    pub(crate) grants: u32,
    pressed: bool,
    reset_since: Option<Mono>,
    /// Only the pad may reset.
    pub(crate) at_pad_only: bool,
}

impl Permission {
    /// As at the start of the program: parked.
    pub(crate) fn new() -> Self {
        Self { missing: Missing::Ready, grants: 0, pressed: false, reset_since: None, at_pad_only: false }
    }

    /// It may move.
    pub(crate) fn given(&self) -> bool {
        self.missing == Missing::Nothing
    }

    /// What the person does in a tick, who sees the phase of the tick before.
    pub(crate) fn watch(
        &mut self,
        now: Mono,
        plan: &Plan,
        seen: Phase,
        pad: &PadInput,
        console: ConsoleInput,
    ) {
        let was = self.pressed;
        let on = pad.present && pad.hold >= plan.pad.hold_on;
        let stays = was && pad.present && pad.hold.min(pad.hold_least) >= plan.pad.hold_off;
        self.pressed = on || stays;
        let edge = self.pressed && !stays;
        let free = pad.present && !self.pressed && centred(plan, pad.sticks);
        match (self.missing, seen) {
            (Missing::Reset, Phase::Tripped) => {
                if pad.pressed.has(Buttons::RESET) {
                    self.reset_since = Some(now);
                }
                if !pad.present || !pad.down.has(Buttons::RESET) {
                    self.reset_since = None;
                }
                let hold_ns = s_to_ns(plan.guard.reset_hold_s);
                let held = self.reset_since.is_some_and(|since| now.since_ns(since) >= hold_ns);
                let console = console.reset && plan.console.reset && !self.at_pad_only;
                if (held || console) && free {
                    self.reset_since = None;
                    self.missing = Missing::Ready;
                }
            }
            (Missing::Ready, Phase::Parked) if free && pad.pressed.has(Buttons::READY) => {
                self.missing = Missing::Release;
            }
            (Missing::Release, Phase::Ready) if !self.pressed => self.missing = Missing::Press,
            (Missing::Press, Phase::Ready) if edge => {
                // A press off-centre is spent.
                let counts = centred(plan, pad.sticks);
                self.missing = if counts { Missing::Nothing } else { Missing::Release };
                self.grants += u32::from(counts);
            }
            _ => {}
        }
    }

    /// What the program says after that tick: a phase that wants more takes back what was done.
    pub(crate) fn hear(&mut self, phase: Phase, tripped_anew: bool) {
        match phase {
            Phase::Tripped if tripped_anew || !matches!(self.missing, Missing::Reset | Missing::Ready) => {
                self.missing = Missing::Reset;
                self.reset_since = None;
            }
            Phase::Stopping if self.missing == Missing::Nothing => self.missing = Missing::Release,
            Phase::Parked if self.at_pad_only => {
                // It has been reset.
                self.at_pad_only = false;
                self.missing = Missing::Ready;
            }
            Phase::Parked if !matches!(self.missing, Missing::Reset | Missing::Ready) => {
                self.missing = Missing::Ready;
            }
            Phase::Parked | Phase::Ready | Phase::Driving | Phase::Stopping | Phase::Tripped => {}
        }
    }

    /// A stop that must have taken the permission back has had its time.
    pub(crate) fn revoke(&mut self, needs_reset: bool) {
        if self.missing == Missing::Nothing {
            self.missing = if needs_reset { Missing::Reset } else { Missing::Release };
        }
    }

    /// The program starts anew.
    pub(crate) fn start_again(&mut self) {
        *self = Self { grants: self.grants, ..Self::new() };
    }
}

fn centred(plan: &Plan, sticks: Sticks) -> bool {
    let within = plan.pad.response.deadband;
    sticks.x.hypot(sticks.y) <= within && sticks.turn.abs() <= within
}
