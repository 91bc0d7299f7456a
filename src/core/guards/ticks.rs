//! Ticks that come late, and the stop line pulled by somebody else.

use super::super::cause::StopBy;
use super::super::event::{Event, say};
use super::super::io::{Inputs, Outputs, Puller};
use super::super::step::ms;
use super::super::{Cause, Core};

impl Core {
    /// The tick came too late, or none came for a while. Looked at before anything is sent, so that it also holds
    /// after the whole program was suspended.
    pub(super) fn late(&self, inputs: &Inputs, out: &mut Outputs) -> Option<Cause> {
        let last = self.state.last_now?;
        let gap = inputs.now.since_ns(last).saturating_sub(self.settings.period_ns);
        let late = inputs.now.since_ns(inputs.due).max(gap);
        let missed = gap / self.settings.period_ns;
        if missed > 0 {
            say(out, Event::TicksMissed { count: u32::try_from(missed).unwrap_or(u32::MAX) });
        }
        (late > self.settings.times.late_ns).then(|| Cause::LateTick { late_ms: ms(late) })
    }

    /// Somebody else has pulled the stop line: told once a pull. Our own pulls have their cause already.
    pub(super) fn pulled(&mut self, inputs: &Inputs, out: &mut Outputs) -> Option<Cause> {
        let pull = inputs.stop_line.filter(|it| self.state.pull_seen != Some(it.number))?;
        self.state.pull_seen = Some(pull.number);
        let cause = match pull.by {
            Puller::Core => return None,
            Puller::PadStop => Cause::StopAsked(StopBy::PadButton),
            Puller::PadGone => Cause::PadGone,
            Puller::Console => Cause::StopAsked(StopBy::Console),
            Puller::Sentinel => Cause::NoTick,
            Puller::Panic => Cause::Panic,
            Puller::SecondSignal => Cause::SecondSignal,
            Puller::LinkGone => {
                let link = self.state.links.iter().position(|it| !it.open).unwrap_or(0);
                Cause::WriteFailed { link: u8::try_from(link).unwrap_or(0), gone: true }
            }
        };
        say(out, Event::StopLinePulled(pull));
        Some(cause)
    }
}
