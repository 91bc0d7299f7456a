//! What the links bring up: ports gone, drivers that report trouble, silence.

use super::super::cause::{DriverTrouble, StopBy};
use super::super::io::{Inputs, LinkInput};
use super::super::link::{Link, News};
use super::super::step::{Seen, ms};
use super::super::{Cause, Core};
use crate::units::Mono;
use crate::wire::status;

/// What is watched on a link at present.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Watch {
    /// Everything.
    All,
    /// A reset is on its way: latches and unanswered frames are expected, new trouble is not.
    Clearing,
    /// Tripped: only what makes the drivers others than they were.
    Tripped,
}

impl Core {
    pub(super) fn link_fault(&self, inputs: &Inputs, seen: &Seen) -> Option<Cause> {
        let watch = match (self.state.tripped(), self.state.clearing) {
            (false, _) => Watch::All,
            (true, Some(_)) => Watch::Clearing,
            (true, None) => Watch::Tripped,
        };
        let nothing = LinkInput::default();
        (0_u8..).zip(self.state.links.iter().zip(&seen.news)).find_map(|(index, (link, news))| {
            let input = inputs.links.get(usize::from(index)).unwrap_or(&nothing);
            other_than_before(index, news)
                .or_else(|| reported(index, link, news, input, watch))
                .or_else(|| if watch == Watch::All { self.silent(index, link, inputs.now) } else { None })
        })
    }

    /// Silence counts from a link that is in use. An identity heard does not end it: only feedback does.
    fn silent(&self, index: u8, link: &Link, now: Mono) -> Option<Cause> {
        if !link.as_planned() {
            return None;
        }
        let times = &self.settings.times;
        if let Some(age) = link.feedback_age_ns(now).filter(|age| *age > times.feedback_quiet_ns) {
            return Some(Cause::FeedbackQuiet { link: index, age_ms: ms(age) });
        }
        // Before the first feedback nothing stands behind the link yet.
        let heard = link.heard.is_some();
        if let Some(age) = link.unheard_ns(now).filter(|age| heard && *age > times.not_heard_ns) {
            return Some(Cause::NotHeard { link: index, age_ms: ms(age) });
        }
        link.blocked().then_some(Cause::WriteFailed { link: index, gone: false })
    }
}

/// The port, the start or the identity is another.
fn other_than_before(index: u8, news: &News) -> Option<Cause> {
    let says = |what| Some(Cause::DriverSays { link: index, what });
    if news.gone {
        Some(Cause::WriteFailed { link: index, gone: true })
    } else if news.restarted {
        says(DriverTrouble::Restarted)
    } else if news.changed {
        says(DriverTrouble::IdentityChanged)
    } else {
        None
    }
}

/// What the status bits say, those of this tick's feedback all together.
fn reported(index: u8, link: &Link, news: &News, input: &LinkInput, watch: Watch) -> Option<Cause> {
    if !news.fresh || watch == Watch::Tripped {
        return None;
    }
    let bits = match watch {
        Watch::All => input.status_seen | link.status(),
        // Bits of before the Clear may still be among those seen.
        Watch::Clearing | Watch::Tripped => link.status(),
    };
    if bits & status::FAULTS != 0 {
        return Some(Cause::DriverSays { link: index, what: DriverTrouble::Fault { status: bits } });
    }
    if bits & status::STOP_INPUT_OPEN != 0 {
        return Some(Cause::StopAsked(StopBy::DriverInput { link: index }));
    }
    if watch == Watch::Clearing {
        return None;
    }
    // Torque that we never asked for: somebody before us did, and the wheels may be turning.
    if bits & status::LATCHED == 0 {
        let torque = !news.continues && bits & status::TORQUE_ON != 0;
        return torque.then_some(Cause::FoundLatched { link: index, status: bits });
    }
    // What was latched when it was first heard did that before our time.
    Some(if news.continues {
        Cause::DriverSays { link: index, what: DriverTrouble::LatchNotOurs { status: bits } }
    } else {
        Cause::FoundLatched { link: index, status: bits }
    })
}
