//! The hands of a drill on the stand-in: ready, drive straight ahead at the pace, then whatever a person in alarm may do
//! with the controls except what is needed to drive again.

use std::fmt::Write as _;

use super::fault::{Fault, Gesture, How};
use crate::config::{PadButton, Plan, SignedAxis};

/// The script, and its moments in seconds from its beginning.
#[derive(Clone, Debug)]
pub(super) struct Script {
    /// Lines `seconds,input,value`.
    pub(super) hands: String,
    /// The fault strikes.
    pub(super) strike_s: f64,
    /// The hands let go of everything.
    pub(super) let_go_s: f64,
    /// The script ends, and the drive with it.
    pub(super) end_s: f64,
}

/// How long the base drives at an even speed before the fault.
const EVEN_S: f64 = 0.6;

/// The script for one fault; `watch_s` is how long the controls are kept where they are after it.
pub(super) fn script(plan: &Plan, pace: usize, fault: &Fault, watch_s: f64) -> Script {
    let pad = &plan.pad;
    let mut hands = Hands { text: String::new(), at_s: 1.2 };
    hands.click(pad.ready);
    for _ in 0..pace {
        hands.click(pad.pace_up);
    }
    let in_ready = matches!(fault.how, How::Standin(harm) if harm.strikes_in_ready());
    let speed_up_s = plan.paces.get(pace).map_or(0.0, |it| it.pace.travel_m_s / plan.limits.speed_up_m_s2);
    if !in_ready {
        hands.button(pad.hold, true);
        hands.at_s += 0.15;
        hands.axis(pad.forward, 1.0);
        hands.at_s += speed_up_s + plan.limits.smoothing_s + EVEN_S;
    }
    let strike_s = hands.at_s;
    match fault.how {
        How::Hands(Gesture::ReleaseHold) => {
            hands.button(pad.hold, false);
            hands.at_s += 0.15;
            // A press in Stopping is spent.
            hands.button(pad.hold, true);
        }
        How::Hands(Gesture::PressStop) => hands.click(pad.stop),
        How::Hands(Gesture::Unplug) => {
            hands.word("unplug");
            hands.at_s += 0.7 * watch_s;
            hands.word("plug");
            hands.button(pad.hold, true);
            hands.axis(pad.forward, 1.0);
        }
        How::Hands(Gesture::FallSilent) => hands.word("silent"),
        How::Standin(_) | How::Act(_) => {}
    }
    let let_go_s = strike_s + watch_s;
    hands.at_s = let_go_s.max(hands.at_s);
    hands.axis(pad.forward, 0.0);
    hands.button(pad.hold, false);
    hands.at_s += 0.8;
    hands.word("end");
    Script { strike_s, let_go_s, end_s: hands.at_s, hands: hands.text }
}

struct Hands {
    text: String,
    at_s: f64,
}

impl Hands {
    fn line(&mut self, input: &str, value: &str) {
        // Writing to a String cannot fail.
        let _ = writeln!(self.text, "{:.3},{input},{value}", self.at_s);
    }

    fn word(&mut self, word: &str) {
        self.line(word, "");
    }

    fn button(&mut self, button: PadButton, down: bool) {
        self.line(&format!("{button:?}"), if down { "1" } else { "0" });
    }

    fn click(&mut self, button: PadButton) {
        self.button(button, true);
        self.at_s += 0.12;
        self.button(button, false);
        self.at_s += 0.08;
    }

    fn axis(&mut self, axis: SignedAxis, value: f64) {
        let SignedAxis { axis, inverted } = axis;
        let value = if inverted { 0.0 - value } else { value };
        self.line(&format!("{axis:?}"), &format!("{value}"));
    }
}
