//! What the core knows of one link: who is behind it, what it said last, what of ours it has taken.

use arrayvec::ArrayVec;
use serde::{Deserialize, Serialize};

use super::event::IdentityField;
use super::io::LinkInput;
use super::settings::{LinkSettings, Settings};
use crate::units::Mono;
use crate::wire::{Feedback, Identity, flag, status};

/// Who is behind a link.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) enum Known {
    /// It has not told since the port was opened or since it started anew.
    #[default]
    Nothing,
    /// It is what the plan says.
    AsPlanned(Identity),
    /// It is something else.
    Differs(IdentityField),
}

/// State of one link.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Link {
    pub(super) open: bool,
    openings: u32,
    pub(super) known: Known,
    /// The newest feedback of this opening and this boot, and when it came.
    pub(super) heard: Option<(Mono, Feedback)>,
    /// Feedback has come in this opening.
    answered: bool,
    /// Next sequence to use.
    pub(super) sequence: u8,
    /// Frames sent in this opening, counted up to 256.
    sent: u16,
    /// When the frame of each sequence was sent.
    sent_at: ArrayVec<Mono, SEQUENCES>,
    last_sent: Option<Mono>,
    /// Sequence and send time of the last frame that was acknowledged.
    acked: Option<(u8, Mono)>,
    /// Since when Drive frames are being sent without a pause: silence about them counts from here at the earliest.
    driving_since: Option<Mono>,
    pub(super) round_trip_ns: u64,
    last_ask: Option<Mono>,
    /// When the last Clear was sent.
    pub(super) cleared: Option<Mono>,
    scaled: bool,
    /// Frames are being held back.
    skipping: bool,
    refused_said: u16,
    blocked_ticks: u8,
}

/// What hearing from a link brought up.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(super) struct News {
    /// It has told who it is, for the first time since its start or otherwise than before.
    pub(super) told: bool,
    /// It started anew although it was in use.
    pub(super) restarted: bool,
    /// It became somebody else although it was in use.
    pub(super) changed: bool,
    /// The port of a link that answered is gone.
    pub(super) gone: bool,
    /// Fresh feedback is there.
    pub(super) fresh: bool,
    /// Frames refused since this was last said.
    pub(super) refused: u16,
    /// It began to scale the commanded speeds.
    pub(super) scaled: bool,
    /// Angles and clock go on from the last ones.
    pub(super) continues: bool,
    /// Microseconds of the driver's clock since the last feedback, when it continues.
    pub(super) clock_us: u32,
}

/// How many sequences there are.
const SEQUENCES: usize = 256;
/// While nobody has told who they are, they are asked this often.
const ASK_EVERY_NS: u64 = 100_000_000;
/// However much is unacknowledged, a frame is sent this often, so that a link that comes back is noticed.
const SEND_AT_LEAST_NS: u64 = 20_000_000;
/// How much a driver's clock may run ahead of ours where it wraps: an eighth of the time and this.
const CLOCK_SLACK_US: u64 = 1_000_000;

impl Link {
    /// Takes in what came since the last tick.
    pub(super) fn hear(&mut self, input: &LinkInput, settings: &Settings, own: &LinkSettings) -> News {
        let mut news = News::default();
        if !input.open || input.openings != self.openings {
            news.gone = self.open && self.answered;
            let sequence = self.sequence;
            *self = Self { sequence, openings: input.openings, ..Self::default() };
        }
        self.open = input.open;
        if !self.open {
            return news;
        }
        self.blocked_ticks = if input.write_blocked { self.blocked_ticks.saturating_add(1) } else { 0 };
        if let Some(identity) = &input.identity {
            self.identify(identity, settings, own, &mut news);
        }
        if let Some(heard) = &input.feedback {
            self.take_feedback(heard.at, &heard.feedback, own, &mut news);
        }
        if news.fresh {
            let scaled = (input.status_seen | self.status()) & status::SCALED != 0;
            news.scaled = scaled && !self.scaled;
            self.scaled = scaled;
        }
        news
    }

    fn identify(&mut self, identity: &Identity, settings: &Settings, own: &LinkSettings, news: &mut News) {
        let known = match difference(identity, settings, own) {
            Some(field) => Known::Differs(field),
            None => Known::AsPlanned(identity.clone()),
        };
        match &self.known {
            Known::AsPlanned(before) if before.boot != identity.boot => {
                self.start_anew();
                news.restarted = true;
            }
            Known::AsPlanned(_) => news.changed = known != self.known,
            Known::Nothing => news.told = true,
            Known::Differs(_) => news.told = known != self.known,
        }
        self.known = known;
    }

    fn take_feedback(&mut self, at: Mono, feedback: &Feedback, own: &LinkSettings, news: &mut News) {
        if feedback.channels.len() != usize::from(own.channels) {
            return;
        }
        if self.is_of_another_start(at, feedback) {
            news.restarted |= matches!(self.known, Known::AsPlanned(_));
            self.start_anew();
            self.known = Known::Nothing;
        }
        match &self.heard {
            Some((_, before)) => {
                news.continues = true;
                news.clock_us = feedback.clock_us.wrapping_sub(before.clock_us);
                news.refused = feedback.refused.wrapping_sub(self.refused_said);
            }
            None => self.answered = true,
        }
        news.fresh = true;
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

    /// Another boot number, or a clock that fell other than by wrapping (a wrap has advanced by about the time that
    /// has passed here).
    fn is_of_another_start(&self, at: Mono, feedback: &Feedback) -> bool {
        if let Known::AsPlanned(identity) = &self.known
            && identity.boot != feedback.boot
        {
            return true;
        }
        let Some((last, before)) = &self.heard else { return false };
        let passed_us = at.since_ns(*last) / 1000;
        let clock_us = u64::from(feedback.clock_us.wrapping_sub(before.clock_us));
        let fell = feedback.clock_us < before.clock_us;
        before.boot != feedback.boot || (fell && clock_us > passed_us + passed_us / 8 + CLOCK_SLACK_US)
    }

    /// Nothing that was heard or sent before counts any more.
    fn start_anew(&mut self) {
        self.heard = None;
        self.acked = None;
        self.sent = 0;
        self.driving_since = None;
        self.cleared = None;
        self.scaled = false;
    }

    /// An acknowledgement counts when it names one of the last frames sent to this start of the driver. One that is
    /// merely repeated tells nothing new, not even when its sequence has been used again meanwhile.
    fn acknowledge(&mut self, at: Mono, ack: u8) {
        if u16::from(self.behind(ack)) >= self.sent || self.acked.is_some_and(|(last, _)| last == ack) {
            return;
        }
        let Some(sent_at) = self.sent_at.get(usize::from(ack)).copied() else { return };
        self.round_trip_ns = at.since_ns(sent_at);
        self.acked = Some((ack, sent_at));
    }

    /// How many frames were sent after that of a sequence.
    fn behind(&self, sequence: u8) -> u8 {
        self.sequence.wrapping_sub(1).wrapping_sub(sequence)
    }

    /// Gives the sequence for a frame that is sent now.
    pub(super) fn send(&mut self, now: Mono) -> u8 {
        let sequence = self.sequence;
        while !self.sent_at.is_full() {
            self.sent_at.push(Mono::default());
        }
        if let Some(place) = self.sent_at.get_mut(usize::from(sequence)) {
            *place = now;
        }
        self.sequence = sequence.wrapping_add(1);
        self.sent = self.sent.saturating_add(1).min(SEQUENCES as u16);
        sequence
    }

    /// Gives the sequence for a Drive.
    pub(super) fn send_drive(&mut self, now: Mono) -> u8 {
        self.skipping = false;
        self.last_sent = Some(now);
        self.driving_since = self.driving_since.or(Some(now));
        self.send(now)
    }

    /// A Drive is held back; whether that is news.
    pub(super) fn skip(&mut self) -> bool {
        !core::mem::replace(&mut self.skipping, true)
    }

    /// No Drive is sent in this phase.
    pub(super) fn pause(&mut self) {
        self.driving_since = None;
        self.skipping = false;
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
    /// without an acknowledgement stand in, less those that the drivers' delay explains.
    pub(super) fn has_room(&self, now: Mono, unsent: Option<u16>, in_flight: u16) -> bool {
        match unsent {
            Some(frames) => frames <= 1,
            None => {
                let unacknowledged =
                    self.acked.map_or(self.sent, |(ack, _)| u16::from(self.behind(ack)).min(self.sent));
                unacknowledged <= 1 + in_flight
                    || self.last_sent.is_none_or(|last| now.since_ns(last) >= SEND_AT_LEAST_NS)
            }
        }
    }

    /// Age of the newest feedback; `None` before the first.
    pub(super) fn feedback_age_ns(&self, now: Mono) -> Option<u64> {
        self.heard.as_ref().map(|(at, _)| now.since_ns(*at))
    }

    /// Age of the send time of the last acknowledged frame, where frames are sent that could be taken.
    pub(super) fn unheard_ns(&self, now: Mono) -> Option<u64> {
        let since = self.driving_since?.max(self.acked.map_or(Mono::default(), |(_, sent_at)| sent_at));
        Some(now.since_ns(since))
    }

    /// Writing has not been possible for longer than a tick.
    pub(super) fn blocked(&self) -> bool {
        self.blocked_ticks > 1
    }

    /// Status of the newest feedback.
    pub(super) fn status(&self) -> u16 {
        self.heard.as_ref().map_or(0, |(_, feedback)| feedback.status)
    }

    /// Has said that it is latched, and not before the last Clear.
    pub(super) fn latched(&self) -> bool {
        self.heard_since_clear() && self.status() & status::LATCHED != 0
    }

    /// Has said after the last Clear that it is not latched.
    pub(super) fn unlatched(&self) -> bool {
        self.heard_since_clear() && self.status() & status::LATCHED == 0
    }

    fn heard_since_clear(&self) -> bool {
        self.heard.as_ref().is_some_and(|(at, _)| self.cleared.is_none_or(|sent| *at > sent))
    }

    /// It is what the plan says.
    pub(super) fn as_planned(&self) -> bool {
        matches!(self.known, Known::AsPlanned(_))
    }
}

/// The first thing in which an Identity is not what the plan needs.
fn difference(identity: &Identity, settings: &Settings, own: &LinkSettings) -> Option<IdentityField> {
    let it = identity;
    let checks = [
        (it.version == 1, IdentityField::Version(it.version)),
        (it.name == own.expect, IdentityField::Name(it.name)),
        (it.channels == own.channels, IdentityField::Channels(it.channels)),
        (it.speed_lsb_urad_s == own.speed_lsb_urad_s, IdentityField::SpeedLsb(it.speed_lsb_urad_s)),
        (it.angle_lsb_urad == own.angle_lsb_urad, IdentityField::AngleLsb(it.angle_lsb_urad)),
        (it.silence_ms >= own.valid_ms, IdentityField::Silence(it.silence_ms)),
        (it.ramp_max_ms >= settings.longest_ramp_ms, IdentityField::RampMax(it.ramp_max_ms)),
    ];
    checks.into_iter().find(|(fits, _)| !fits).map(|(_, field)| field)
}

/// Whether any of the links' drivers has a yaw rate, for a plan that wants one.
pub(super) fn any_yaw_rate<'a>(mut links: impl Iterator<Item = &'a Link>) -> bool {
    links.any(|link| matches!(&link.known, Known::AsPlanned(it) if it.flags & flag::YAW_RATE != 0))
}
