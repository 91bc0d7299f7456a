//! The scripted drive of the rehearsal, written for whatever pad the configuration describes.

use std::fmt::Write as _;

use crate::config::{PadButton, PadPlan, Plan, SignedAxis};

/// The drive as text for `--hands`, and the moments that the rehearsal itself must know.
#[derive(Clone, Debug)]
pub(super) struct Drive {
    /// Lines `seconds,input,value`.
    pub(super) hands: String,
    /// The square in the room's frame: from the first to the last stick movement of it.
    pub(super) square_s: (f64, f64),
    /// When the line is to be cut, and when it is to be joined again.
    pub(super) line_cut_s: (f64, f64),
    /// When the script ends.
    pub(super) end_s: f64,
}

/// The least time the whole of it takes. `--seconds` stretches the pauses and the legs, never below this.
pub(super) const SHORTEST_S: f64 = 20.0;
/// How long it takes unless told.
pub const USUAL_S: f64 = 25.0;

/// How far the sticks go in the square: below the edge, so that turn and travel both fit at once on any base whose
/// configuration passes the check for its pace.
const SQUARE_TRAVEL: f64 = 0.8;
const SQUARE_TURN: f64 = 0.5;

/// The whole drive: ready, a square in the room's frame while the base turns, a release, an emergency stop in full
/// travel, a reset, a pad pulled out, a line cut, and home.
#[must_use]
pub(super) fn whole_drive(plan: &Plan, seconds: f64) -> Drive {
    let pad = &plan.pad;
    let stretch = seconds.max(SHORTEST_S) / USUAL_S;
    let mut hands =
        Hands { pad, text: String::new(), at_s: 0.0, stretch, reset_hold_s: plan.guard.reset_hold_s };
    hands.wait(0.7);
    hands.click(pad.ready);
    if plan.paces.len() > 1 {
        hands.click(pad.pace_up);
    }
    hands.click(pad.frame);
    let square_from = hands.at_s;
    hands.press(pad.hold);
    for (forward, left) in [(1.0, 0.0), (0.0, 1.0), (-1.0, 0.0), (0.0, -1.0)] {
        hands.sticks(forward * SQUARE_TRAVEL, left * SQUARE_TRAVEL, SQUARE_TURN);
        hands.wait(1.0);
        hands.sticks(0.0, 0.0, 0.0);
        hands.wait(0.7);
    }
    let square_to = hands.at_s;

    // A release in travel.
    hands.sticks(1.0, 0.0, 0.0);
    hands.wait(0.8);
    hands.release(pad.hold);
    hands.wait(0.1);
    hands.sticks(0.0, 0.0, 0.0);
    hands.wait(1.1);

    // The stop button in full travel, then the reset.
    hands.press(pad.hold);
    hands.sticks(-1.0, 0.0, 0.0);
    hands.wait(0.9);
    hands.click(pad.stop);
    hands.release(pad.hold);
    hands.sticks(0.0, 0.0, 0.0);
    hands.wait(0.9);
    hands.reset_and_ready();

    // The pad pulled out in travel.
    hands.press(pad.hold);
    hands.sticks(0.0, 1.0, 0.0);
    hands.wait(0.8);
    hands.word("unplug");
    hands.wait(0.9);
    hands.word("plug");
    hands.wait(0.2);
    hands.reset_and_ready();

    // The line cut in travel; hands are let go as a person would.
    hands.press(pad.hold);
    hands.sticks(0.0, -1.0, 0.0);
    hands.wait(0.8);
    let cut_s = hands.at_s;
    hands.wait(0.3);
    hands.release(pad.hold);
    hands.sticks(0.0, 0.0, 0.0);
    hands.wait(0.6);
    let joined_s = hands.at_s;
    hands.wait(0.3);
    hands.reset_and_ready();

    // Home: the turn that the square left is taken back, slowly.
    hands.press(pad.hold);
    hands.sticks(0.0, 0.0, -SQUARE_TURN);
    hands.wait(1.2);
    hands.sticks(0.0, 0.0, 0.0);
    hands.wait(0.6);
    hands.release(pad.hold);
    hands.wait(0.6);
    hands.word("end");
    Drive {
        square_s: (square_from, square_to),
        line_cut_s: (cut_s, joined_s),
        end_s: hands.at_s,
        hands: hands.text,
    }
}

/// Writes the lines, keeping the time.
struct Hands<'a> {
    pad: &'a PadPlan,
    text: String,
    at_s: f64,
    stretch: f64,
    reset_hold_s: f64,
}

impl Hands<'_> {
    fn wait(&mut self, seconds: f64) {
        self.at_s += seconds * self.stretch;
    }

    fn line(&mut self, input: &str, value: &str) {
        // Writing to a String cannot fail.
        let _ = writeln!(self.text, "{:.3},{input},{value}", self.at_s);
    }

    fn word(&mut self, word: &str) {
        self.line(word, "");
    }

    fn press(&mut self, button: PadButton) {
        self.line(&format!("{button:?}"), "1");
        self.wait(0.15);
    }

    fn release(&mut self, button: PadButton) {
        self.line(&format!("{button:?}"), "0");
    }

    fn click(&mut self, button: PadButton) {
        self.press(button);
        self.release(button);
        self.wait(0.1);
    }

    /// Reset is held: its time is the guard's, not stretched below it.
    fn reset_and_ready(&mut self) {
        self.line(&format!("{:?}", self.pad.reset), "1");
        self.at_s += self.reset_hold_s + 0.25;
        self.release(self.pad.reset);
        self.wait(0.2);
        self.click(self.pad.ready);
        self.wait(0.1);
    }

    fn sticks(&mut self, forward: f64, left: f64, turn_left: f64) {
        let pad = self.pad;
        for (axis, value) in [(pad.forward, forward), (pad.left, left), (pad.turn_left, turn_left)] {
            let SignedAxis { axis, inverted } = axis;
            let value = if inverted { 0.0 - value } else { value };
            self.line(&format!("{axis:?}"), &format!("{value}"));
        }
    }
}
