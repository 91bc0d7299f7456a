//! The hold-to-run control: a button, a trigger with two thresholds, or three positions like an enabling device
//! (IEC 60947-5-8): off, run, squeezed.

use serde::{Deserialize, Serialize};

use super::io::PadInput;

/// Where the control is pressed, released and squeezed through, 0 to 1.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct HoldSettings {
    pub(super) on: f64,
    pub(super) off: f64,
    pub(super) squeeze: Option<f64>,
}

/// What the control is and has been.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Hold {
    /// Pressed at present, with hysteresis between the two thresholds.
    pressed: bool,
    /// It was seen released in Ready; a press counts only then.
    armed: bool,
}

/// What a tick saw of the control.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct HoldSeen {
    /// Pressed now.
    pub(super) pressed: bool,
    /// It went down in this tick.
    pub(super) edge: bool,
    /// It was released since the last tick, even if it is down again.
    pub(super) released: bool,
    /// Squeezed through.
    pub(super) squeezed: bool,
}

impl Hold {
    /// Looks at the pad. A value that is no number counts as released, and without a pad nothing is held.
    pub(super) fn look(&mut self, pad: &PadInput, settings: &HoldSettings) -> HoldSeen {
        let value = if pad.present && pad.hold.is_finite() { pad.hold } else { 0.0 };
        let least = if pad.hold_least.is_finite() { pad.hold_least.min(value) } else { 0.0 };
        let was = self.pressed;
        let stays = least >= settings.off;
        self.pressed = value >= settings.on || (was && stays && value >= settings.off);
        HoldSeen {
            pressed: self.pressed,
            edge: self.pressed && !(was && stays),
            released: !self.pressed || !stays,
            squeezed: settings.squeeze.is_some_and(|from| value >= from),
        }
    }

    /// In Ready: a tick with the control released makes the next press count.
    pub(super) fn arm(&mut self, seen: HoldSeen) {
        if !seen.pressed {
            self.armed = true;
        }
    }

    /// Pressed, and a press would count.
    pub(super) fn outline(self) -> (bool, bool) {
        (self.pressed, self.armed)
    }

    /// Whether a press would count; and whatever happens, it is spent.
    pub(super) fn spend(&mut self) -> bool {
        core::mem::take(&mut self.armed)
    }
}
