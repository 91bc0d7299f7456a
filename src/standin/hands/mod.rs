//! A scripted pair of hands in place of a gamepad.
//!
//! A script is text, one line an action: `seconds,input,value`. Inputs are gilrs' names of axes (value -1 to 1, up and
//! right positive) and buttons (0 to 1), or one of four words with an empty value:
//!
//! | word | means |
//! | --- | --- |
//! | `unplug` | the pad is gone: nothing is reported, and everything on it comes to rest |
//! | `plug` | the pad is there again, as it was left: at rest, but for what lines since `unplug` have set |
//! | `silent` | the pad stays and keeps its values, but gives no sign of life until the next line |
//! | `end` | the script is over; nothing may follow |
//!
//! Times never fall from line to line. Empty lines and everything from a `#` on mean nothing. A pad starts plugged in
//! and at rest, and counts as one whose reports keep coming while it is still.

mod script;

pub use script::{Action, Control, HandsMistake, HandsProblem, Line, Script};

use crate::config::{PadAxis, PadButton, PadPlan, SignedAxis};
use crate::core::io::{Buttons, PadInput};
use crate::shaping::Sticks;
use crate::units::{Mono, s_to_ns};

/// Hands that play a [`Script`], mapped through a [`PadPlan`] as a real pad is.
#[derive(Clone, Debug)]
pub struct Hands {
    script: Script,
    plan: PadPlan,
    /// Lines before this one have been played.
    next: usize,
    values: Values,
    plugged: bool,
    silent: bool,
    last_sign: Mono,
    down: Buttons,
}

impl Hands {
    /// Hands that have not begun yet.
    #[must_use]
    pub fn new(script: Script, plan: &PadPlan) -> Self {
        Self {
            script,
            plan: plan.clone(),
            next: 0,
            values: Values::default(),
            plugged: true,
            silent: false,
            last_sign: Mono::default(),
            down: Buttons::default(),
        }
    }

    /// The pad `elapsed_s` after the script's beginning, which is `now` on the clock. To be called once a tick: presses
    /// and releases between two calls are reported by the later one. Allocates nothing.
    pub fn at(&mut self, elapsed_s: f64, now: Mono) -> PadInput {
        let mut pressed = Buttons::default();
        let mut hold_least = self.hold();
        while let Some(line) = self.script.lines().get(self.next).filter(|line| line.at_s <= elapsed_s) {
            let ago_ns = s_to_ns(elapsed_s - line.at_s);
            self.last_sign = Mono::from_ns(now.ns().saturating_sub(ago_ns));
            self.silent = false;
            match line.action {
                Action::Set(control, value) => self.values.set(control, value),
                Action::Unplug => {
                    self.plugged = false;
                    self.values = Values::default();
                }
                Action::Plug => self.plugged = true,
                Action::Silent => self.silent = true,
                Action::End => {}
            }
            self.next += 1;
            let down = self.buttons();
            if line.action != Action::Plug {
                pressed = pressed.with(down.without(self.down));
            }
            self.down = down;
            hold_least = hold_least.min(self.hold());
            if line.action == Action::Unplug {
                break; // said by at least one call, however soon the plug follows
            }
        }
        if !self.plugged {
            return PadInput { last_sign: self.last_sign, streams: true, ..PadInput::default() };
        }
        if !self.silent {
            self.last_sign = now;
        }
        PadInput {
            present: true,
            streams: true,
            last_sign: self.last_sign,
            sticks: self.sticks(),
            hold: self.hold(),
            hold_least,
            down: self.down,
            pressed,
        }
    }

    /// Whether the script's `end` line has come. A script without one never ends.
    #[must_use]
    pub fn ended(&self, elapsed_s: f64) -> bool {
        self.script.end_s().is_some_and(|end_s| elapsed_s >= end_s)
    }

    fn sticks(&self) -> Sticks {
        let axis = |signed: SignedAxis| {
            let value = self.values.axis(signed.axis);
            if signed.inverted { 0.0 - value } else { value }
        };
        Sticks { x: axis(self.plan.forward), y: axis(self.plan.left), turn: axis(self.plan.turn_left) }
    }

    /// The hold control as it is reported: 0 while the pad is not there.
    fn hold(&self) -> f64 {
        if self.plugged { self.values.button(self.plan.hold) } else { 0.0 }
    }

    /// The set of buttons that are down, from their values and from which of them were down before.
    fn buttons(&self) -> Buttons {
        let mut set = Buttons::default();
        for (button, meaning) in Buttons::meanings(&self.plan) {
            let threshold = if self.down.has(meaning) { Buttons::UP_BELOW } else { Buttons::DOWN_FROM };
            if self.plugged && self.values.button(button) >= threshold {
                set = set.with(meaning);
            }
        }
        set
    }
}

/// Where the script has put every axis and button.
#[derive(Clone, Copy, Debug, Default)]
struct Values {
    axes: [f64; script::AXES.len()],
    buttons: [f64; script::BUTTONS.len()],
}

impl Values {
    fn set(&mut self, control: Control, value: f64) {
        let slot = match control {
            Control::Axis(axis) => self.axes.get_mut(axis as usize),
            Control::Button(button) => self.buttons.get_mut(button as usize),
        };
        if let Some(slot) = slot {
            *slot = value;
        }
    }

    fn axis(&self, axis: PadAxis) -> f64 {
        self.axes.get(axis as usize).copied().unwrap_or(0.0)
    }

    fn button(&self, button: PadButton) -> f64 {
        self.buttons.get(button as usize).copied().unwrap_or(0.0)
    }
}

#[cfg(test)]
mod tests;
