//! What the core knows of one link: who is behind it, what it said last, what of ours it has taken.

use arrayvec::ArrayVec;
use serde::{Deserialize, Serialize};

use super::event::{Found, IdentityField, Wait};
use super::io::LinkInput;
use super::settings::{LinkSettings, Settings};
use crate::units::Mono;
use crate::wire::{Feedback, Identity, flag, status};

/// Who is behind a link.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) enum Known {
    /// It has not told since the port was opened.
    #[default]
    Nothing,
    /// It is what the plan says.
    AsPlanned(Identity),
    /// It is something else.
    Differs(IdentityField, Found),
}

/// State of one link.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Link {
    pub(super) open: bool,
    openings: u32,
    pub(super) known: Known,
    /// The newest feedback of this opening, and when it came.
    pub(super) heard: Option<(Mono, Feedback)>,
    /// When the first feedback of this opening came; guards on silence run from here.
    first_heard: Option<Mono>,
    /// Next sequence to use.
    pub(super) sequence: u8,
    /// Frames sent in this opening, at most 256 remembered.
    sent: u16,
    /// When the frame of each sequence was sent.
    sent_at: ArrayVec<Mono, 256>,
    last_sent: Option<Mono>,
    /// Sequence and send time of the last frame that was acknowledged.
    acked: Option<(u8, Mono)>,
    pub(super) round_trip_ns: u64,
    last_ask: Option<Mono>,
    /// When the last Clear was sent.
    pub(super) cleared: Option<Mono>,
    pub(super) scaled: bool,
    refused_said: u16,
    write_blocked: u8,
}

/// What hearing from a link brought up.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(super) struct News {
    /// It has told who it is, for the first time in this opening: in what it differs from the plan, if it does.
    pub(super) told: Option<Option<(IdentityField, Found)>>,
    /// It started anew in an opening in which it was known.
    pub(super) restarted: bool,
    /// It became somebody else in an opening in which it was known.
    pub(super) changed: bool,
    /// The port of a link that answered is gone.
    pub(super) gone: bool,
    /// Fresh feedback is there.
    pub(super) fresh: bool,
    /// Frames refused since this was last said.
    pub(super) refused: u16,
    /// The angles go on from the last ones.
    pub(super) continues: bool,
    /// Microseconds of the driver's clock since the last feedback, when it continues.
    pub(super) clock_us: u32,
}

/// While nobody has told who they are, they are asked this often.
const ASK_EVERY_NS: u64 = 100_000_000;
/// However much is unacknowledged, a frame is sent this often, so that a link that comes back is noticed.
const SEND_AT_LEAST_NS: u64 = 20_000_000;
/// A clock that steps back by less than this has wrapped or been reordered, never restarted.
const CLOCK_FELL_US: u32 = 1 << 31;

impl Link {
    /// Takes in what came since the last tick.
    pub(super) fn hear(&mut self, input: &LinkInput, settings: &Settings, own: &LinkSettings) -> News {
        let mut news = News::default();
        if !input.open || input.openings != self.openings {
            news.gone = self.open && self.first_heard.is_some();
            let sequence = self.sequence;
            *self = Self { sequence, openings: input.openings, ..Self::default() };
        }
        self.open = input.open;
        if !self.open {
            return news;
        }
        self.write_blocked = if input.write_blocked { self.write_blocked.saturating_add(1) } else { 0 };
        if let Some(identity) = &input.identity {
            self.identify(identity, settings, own, &mut news);
        }
        if let Some(heard) = &input.feedback {
            self.take_feedback(heard.at, &heard.feedback, own, &mut news);
        }
        news
    }

    fn identify(&mut self, identity: &Identity, settings: &Settings, own: &LinkSettings, news: &mut News) {
        let known = match difference(identity, settings, own) {
            Some((field, found)) => Known::Differs(field, found),
            None => Known::AsPlanned(identity.clone()),
        };
        match &self.known {
            Known::Nothing => news.told = Some(difference(identity, settings, own)),
            Known::AsPlanned(before) if before.boot != identity.boot => news.restarted = true,
            Known::AsPlanned(_) | Known::Differs(..) => news.changed = known != self.known,
        }
        self.known = known;
    }

    fn take_feedback(&mut self, at: Mono, feedback: &Feedback, own: &LinkSettings, news: &mut News) {
        if feedback.channels.len() != usize::from(own.channels) {
            return;
        }
        if let Some((_, before)) = &self.heard {
            let clock_us = feedback.clock_us.wrapping_sub(before.clock_us);
            let restarted = before.boot != feedback.boot || clock_us >= CLOCK_FELL_US;
            news.restarted |= restarted;
            news.continues = !restarted;
            news.clock_us = clock_us;
            if restarted {
                // Somebody has to tell again who is there.
                self.known = Known::Nothing;
                self.acked = None;
                self.refused_said = feedback.refused;
            }
        } else {
            self.refused_said = feedback.refused;
        }
        news.fresh = true;
        self.first_heard = self.first_heard.or(Some(at));
        news.refused = feedback.refused.wrapping_sub(self.refused_said);
        self.refused_said = feedback.refused;
        self.acknowledge(at, feedback.ack);
        match &mut self.heard {
            Some((when, kept)) => {
                *when = at;
                kept.clone_from(feedback);
            }
            None => self.heard = Some((at, feedback.clone())),
        }
    }

    /// An acknowledgement counts when it names one of the last frames sent in this opening.
    fn acknowledge(&mut self, at: Mono, ack: u8) {
        let behind = self.sequence.wrapping_sub(1).wrapping_sub(ack);
        if u16::from(behind) >= self.sent.min(256) {
            return;
        }
        let Some(sent_at) = self.sent_at.get(usize::from(ack)).copied() else { return };
        if self.acked.is_none_or(|(last, _)| last != ack) {
            self.round_trip_ns = at.since_ns(sent_at);
        }
        self.acked = Some((ack, sent_at));
    }

    /// Gives the sequence for a frame that is sent now.
    pub(super) fn send(&mut self, now: Mono) -> u8 {
        let sequence = self.sequence;
        while self.sent_at.len() < 256 {
            self.sent_at.push(Mono::default());
        }
        if let Some(place) = self.sent_at.get_mut(usize::from(sequence)) {
            *place = now;
        }
        self.sequence = sequence.wrapping_add(1);
        self.sent = self.sent.saturating_add(1);
        self.last_sent = Some(now);
        sequence
    }

    /// Whether it is time to ask who is there.
    pub(super) fn ask_due(&mut self, now: Mono) -> bool {
        let due = self.open
            && self.known == Known::Nothing
            && self.last_ask.is_none_or(|last| now.since_ns(last) >= ASK_EVERY_NS);
        if due {
            self.last_ask = Some(now);
        }
        due
    }

    /// Whether a motion frame may follow: not while more than one is unsent. Where the kernel does not count, frames
    /// without an acknowledgement stand in, less those that the driver's delay explains.
    pub(super) fn has_room(&self, now: Mono, unsent: Option<u16>, in_flight: u16) -> bool {
        match unsent {
            Some(frames) => frames <= 1,
            None => {
                let unacked = match self.acked {
                    Some((ack, _)) => u16::from(self.sequence.wrapping_sub(1).wrapping_sub(ack)),
                    None => self.sent.min(256),
                };
                unacked <= 1 + in_flight
                    || self.last_sent.is_none_or(|last| now.since_ns(last) >= SEND_AT_LEAST_NS)
            }
        }
    }

    /// Age of the newest feedback; `None` before the first of this opening.
    pub(super) fn feedback_age_ns(&self, now: Mono) -> Option<u64> {
        self.heard.as_ref().map(|(at, _)| now.since_ns(*at))
    }

    /// Age of the send time of the last acknowledged frame; runs from the first feedback.
    pub(super) fn unheard_ns(&self, now: Mono) -> Option<u64> {
        let since = self.acked.map(|(_, sent_at)| sent_at).max(self.first_heard)?;
        matches!(self.known, Known::AsPlanned(_)).then(|| now.since_ns(since))
    }

    /// Writing has not been possible for longer than a tick.
    pub(super) fn blocked(&self) -> bool {
        self.write_blocked > 1
    }

    /// Status of the newest feedback.
    pub(super) fn status(&self) -> u16 {
        self.heard.as_ref().map_or(0, |(_, feedback)| feedback.status)
    }

    /// Known to be latched.
    pub(super) fn latched(&self) -> bool {
        self.status() & status::LATCHED != 0
    }

    /// Guards on this link are alive: it has answered in this opening.
    pub(super) fn answered(&self) -> bool {
        self.first_heard.is_some()
    }

    /// What keeps this link from being used, apart from a latch.
    pub(super) fn wait(&self, index: u8, now: Mono, quiet_ns: u64) -> Option<Wait> {
        if !self.open {
            return Some(Wait::LinkNotOpen { link: index });
        }
        match &self.known {
            Known::Nothing => return Some(Wait::NoIdentity { link: index }),
            Known::Differs(field, found) => {
                return Some(Wait::IdentityDiffers { link: index, field: *field, found: *found });
            }
            Known::AsPlanned(_) => {}
        }
        if self.feedback_age_ns(now).is_none_or(|age| age > quiet_ns) {
            return Some(Wait::NoFeedback { link: index });
        }
        let bits = self.status();
        if bits & status::FAULTS != 0 {
            return Some(Wait::Fault { link: index, status: bits });
        }
        (bits & status::STOP_INPUT_OPEN != 0).then_some(Wait::StopInputOpen { link: index })
    }
}

/// The first thing in which an Identity is not what the plan needs, and what it says there.
fn difference(
    identity: &Identity,
    settings: &Settings,
    own: &LinkSettings,
) -> Option<(IdentityField, Found)> {
    let it = identity;
    let number = |value| Found::Number(value);
    let checks = [
        (it.version == 1, IdentityField::Version, number(u32::from(it.version))),
        (it.name == own.expect, IdentityField::Name, Found::Name(it.name)),
        (it.channels == own.channels, IdentityField::Channels, number(u32::from(it.channels))),
        (it.speed_lsb_urad_s == own.speed_lsb_urad_s, IdentityField::SpeedLsb, number(it.speed_lsb_urad_s)),
        (it.angle_lsb_urad == own.angle_lsb_urad, IdentityField::AngleLsb, number(it.angle_lsb_urad)),
        (it.silence_ms >= own.valid_ms, IdentityField::Silence, number(u32::from(it.silence_ms))),
        (
            it.ramp_max_ms >= settings.longest_ramp_ms,
            IdentityField::RampMax,
            number(u32::from(it.ramp_max_ms)),
        ),
    ];
    checks.into_iter().find(|(fits, ..)| !fits).map(|(_, field, found)| (field, found))
}

/// Whether any of the links' drivers has a yaw rate, for a plan that wants one.
pub(super) fn any_yaw_rate<'a>(mut links: impl Iterator<Item = &'a Link>) -> bool {
    links.any(|link| matches!(&link.known, Known::AsPlanned(it) if it.flags & flag::YAW_RATE != 0))
}
