//! The pad: gone, quiet, and the stops that people ask.

use super::super::cause::StopBy;
use super::super::io::{Buttons, Inputs, PadInput};
use super::super::step::Seen;
use super::super::{Cause, Core};

impl Core {
    /// A pad that was there is not any more.
    pub(super) fn pad_gone(&self, inputs: &Inputs) -> Option<Cause> {
        (self.state.pad_present && !inputs.pad.present).then_some(Cause::PadGone)
    }

    /// How long the pad has given no sign of life, if that is too long. A pad that only reports changes may be still
    /// for a while; with a cable it is known to be there.
    pub(in super::super) fn pad_quiet_ns(&self, inputs: &Inputs) -> Option<u64> {
        let times = &self.settings.times;
        let limit = match (inputs.pad.streams, self.settings.wired) {
            (true, _) => times.pad_quiet_stream_ns,
            (false, true) => return None,
            (false, false) => times.pad_quiet_change_ns,
        };
        let age = inputs.now.since_ns(inputs.pad.last_sign);
        (age > limit).then_some(age)
    }

    /// A stop that a person asks. It counts as long as it stands, except that it is told only once while Tripped.
    pub(in super::super) fn stop_asked(&self, inputs: &Inputs, seen: &Seen) -> Option<StopBy> {
        let pad = &inputs.pad;
        let told = self.state.tripped() && self.state.clearing.is_none();
        let down = pad.down.has(Buttons::STOP) && !told;
        if pad.present && (pad.pressed.has(Buttons::STOP) || down) {
            Some(StopBy::PadButton)
        } else if seen.hold.squeezed && !told {
            Some(StopBy::Squeeze)
        } else if inputs.console.stop {
            Some(StopBy::Console)
        } else {
            None
        }
    }
}

/// A stop stands at the pad, whether told or not: the console must not reset over it.
pub(in super::super) fn stands_at_pad(pad: &PadInput, squeezed: bool) -> bool {
    squeezed || (pad.present && pad.down.with(pad.pressed).has(Buttons::STOP))
}
