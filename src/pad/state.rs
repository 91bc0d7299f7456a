//! The pad's values under their meanings, kept between events. No devices here: it can be tested by itself.

use crate::config::{PadAxis, PadButton, PadPlan, SignedAxis};
use crate::core::io::{Buttons, PadInput};
use crate::shaping::Sticks;
use crate::units::Mono;

/// Values by meaning, and the presses that nobody has taken yet.
#[derive(Clone, Debug)]
pub(super) struct State {
    plan: PadPlan,
    input: PadInput,
}

impl State {
    pub(super) fn new(plan: &PadPlan) -> Self {
        Self { plan: plan.clone(), input: PadInput::default() }
    }

    /// A pad is there; its values follow, without counting as presses.
    pub(super) fn plugged(&mut self, now: Mono) {
        self.input = PadInput { present: true, last_sign: now, ..PadInput::default() };
    }

    /// It is gone: everything on it comes to rest, at once.
    pub(super) fn unplugged(&mut self) {
        self.input = PadInput::default();
    }

    /// The pad gave a sign of life.
    pub(super) fn alive(&mut self, now: Mono) {
        self.input.last_sign = now;
    }

    pub(super) fn streams(&mut self, streams: bool) {
        self.input.streams = streams;
    }

    /// An axis moved; gilrs' signs, up and right positive.
    pub(super) fn axis(&mut self, axis: PadAxis, value: f64) {
        let plan = &self.plan;
        let sticks: &mut Sticks = &mut self.input.sticks;
        for (meant, place) in
            [(plan.forward, &mut sticks.x), (plan.left, &mut sticks.y), (plan.turn_left, &mut sticks.turn)]
        {
            let SignedAxis { axis: meant, inverted } = meant;
            if meant == axis {
                *place = if inverted { 0.0 - value } else { value };
            }
        }
    }

    /// A button has a value, 0 to 1. `held`: it was so before anybody looked, which is no press.
    /// Gives whether this is a press of the stop button.
    pub(super) fn button(&mut self, button: PadButton, value: f64, held: bool) -> bool {
        if button == self.plan.hold {
            self.input.hold = value;
            self.input.hold_least = self.input.hold_least.min(value);
            if held {
                self.input.hold_least = value;
            }
            return false;
        }
        let Some((_, meaning)) = Buttons::meanings(&self.plan).into_iter().find(|(it, _)| *it == button)
        else {
            return false;
        };
        let was = self.input.down.has(meaning);
        let down = value >= Buttons::DOWN_FROM || (was && value >= Buttons::UP_BELOW);
        self.input.down = if down { self.input.down.with(meaning) } else { self.input.down.without(meaning) };
        let pressed = down && !was && !held;
        if pressed {
            self.input.pressed = self.input.pressed.with(meaning);
        }
        pressed && meaning == Buttons::STOP
    }

    /// The whole state, with what has not been taken yet.
    pub(super) fn input(&self) -> PadInput {
        self.input
    }

    /// It has been taken: presses and the least of the hold begin anew.
    pub(super) fn taken(&mut self) {
        self.input.pressed = Buttons::default();
        self.input.hold_least = self.input.hold;
    }
}
