//! What is seen of one fault: when it struck, the first stop frame, standstill, the way until then, and whether anything
//! moved again. From the run file, and where the drive is dead from the line itself.

use std::path::Path;

use super::follow::{Follower, Round};
use crate::config::Plan;
use crate::core::io::Phase;
use crate::core::{Cause, Event};
use crate::record::reader::{Run, RunError};
use crate::record::{Item, Tick};
use crate::units::{Mono, s_to_ns};
use crate::wire::{Deframer, Direction, Feedback, FromDrivers, kind, parse_from_drivers};

/// When a fault struck.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Struck {
    /// The drill did it, then.
    At(Mono),
    /// The scripted hands did it, so long after they began to play.
    Script(f64),
    /// A person did it: the last moment at which all was well, as the guard that saw it knows.
    AsTheGuardKnows,
}

/// One moment for the plot.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Moment {
    /// Since the fault.
    pub t_s: f64,
    /// Speed of travel.
    pub m_s: f64,
}

/// What was seen.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct Seen {
    /// When it struck; `None` when nothing was decided and nobody knows.
    pub(super) struck: Option<Mono>,
    /// When the drive decided to stop, and why.
    pub(super) decided: Option<(Mono, String)>,
    /// When the first stop frame was written.
    pub(super) first_stop: Option<Mono>,
    /// When every wheel stood.
    pub(super) standstill: Option<Mono>,
    /// It came to stand while there was no feedback: when was not seen.
    pub(super) blind: bool,
    /// Way of the outermost point from the fault to standstill.
    pub(super) way_m: f64,
    /// The part of it from the decision on.
    pub(super) after_decision_m: f64,
    /// A wheel turned after standstill, or was told to.
    pub(super) moved_again: bool,
    /// The drive drove on from the fault to the end of the watch.
    pub(super) went_on: bool,
    /// What was sent, over time.
    pub(super) sent: Vec<Moment>,
    /// What the wheels did, over time.
    pub(super) measured: Vec<Moment>,
}

/// The record before the fault that is shown.
const BEFORE_NS: u64 = 600_000_000;

/// Looks at one fault, at what is recorded first and then at what is heard.
pub(super) struct Watch<'a> {
    quiet_ns: u64,
    follower: Follower<'a>,
    pub(super) seen: Seen,
    phase: Phase,
    /// The drivers have been told to stand since they were told to stop.
    told_to_stand: bool,
    /// A stop may be seen from here on: the fault must be noticed, or the drive be dead.
    stops: bool,
}

impl<'a> Watch<'a> {
    fn new(plan: &'a Plan, struck: Option<Mono>) -> Self {
        Self {
            quiet_ns: s_to_ns(plan.guard.feedback_quiet_ms * 1e-3),
            follower: Follower::new(plan),
            seen: Seen { struck, went_on: true, ..Seen::default() },
            phase: Phase::Parked,
            told_to_stand: false,
            stops: false,
        }
    }

    /// Reads a run. `until` is when the watch ends; what came later is not looked at.
    pub(super) fn read(
        path: &Path,
        plan: &'a Plan,
        struck: Struck,
        until: Option<Mono>,
    ) -> Result<Self, RunError> {
        let known = match struck {
            Struck::At(at) => Some(at),
            Struck::Script(after_s) => hands_began(path)?.map(|it| it.plus_ns(s_to_ns(after_s))),
            Struck::AsTheGuardKnows => guard_knows(path)?,
        };
        let mut watch = Self::new(plan, known);
        let mut run = Run::open(path)?;
        let in_time = |at: Mono| until.is_none_or(|end| at <= end);
        while let Some(item) = run.next() {
            match item {
                Item::Tick(tick) if in_time(tick.inputs.now) => watch.tick(&tick),
                Item::Frame { at, direction: Direction::ToDrivers, bytes, .. } if in_time(at) => {
                    watch.written(at, &bytes);
                }
                Item::Frame { at, link, direction: Direction::FromDrivers, bytes } if in_time(at) => {
                    if let Some(feedback) = feedback(&bytes) {
                        watch.hear(at, usize::from(link), &feedback);
                    }
                }
                Item::Event(_, Event::PadQuiet { .. }) => watch.pad_quiet(),
                Item::Tick(_)
                | Item::Frame { .. }
                | Item::Event(..)
                | Item::Pad(..)
                | Item::Snapshot(..)
                | Item::Lost(..) => {}
            }
        }
        Ok(watch)
    }

    /// The drive is dead: nobody decides any more, the drivers stop by themselves.
    pub(super) fn drive_is_dead(&mut self) {
        self.stops = true;
    }

    /// A feedback from the drivers.
    pub(super) fn hear(&mut self, at: Mono, link: usize, feedback: &Feedback) {
        let Some(round) = self.follower.hear(at, link, feedback) else { return };
        let at = round.at;
        let Some(struck) = self.seen.struck else { return };
        let t_s = if at < struck { -struck.since_s(at) } else { at.since_s(struck) };
        if at.plus_ns(BEFORE_NS) > struck {
            self.seen.measured.push(Moment { t_s, m_s: round.travel_m_s });
        }
        if at < struck {
            return;
        }
        if self.seen.standstill.is_some() {
            self.seen.moved_again |= !round.stands();
            return;
        }
        self.seen.way_m += round.way_m * share_after(struck, &round);
        if let Some((decided, _)) = &self.seen.decided {
            self.seen.after_decision_m += round.way_m * share_after(*decided, &round);
        }
        if self.stops && round.stands() {
            self.seen.blind = round.last.is_some_and(|last| at.since_ns(last) > self.quiet_ns);
            let stood = round.came_to_stand.unwrap_or(at);
            self.seen.standstill = Some(stood.max(struck));
        }
    }

    fn written(&mut self, at: Mono, bytes: &[u8]) {
        let after = self.seen.struck.is_some_and(|it| at >= it);
        // The kind is the first byte before COBS; a code byte comes before it, and an empty frame may come before that.
        let stop = bytes.split(|it| *it == 0).any(|it| it.get(1) == Some(&kind::STOP));
        if after && stop && self.seen.first_stop.is_none() {
            self.seen.first_stop = Some(at);
            // The sentinel decides without the tick.
            self.stops = true;
        }
    }

    /// The event follows its tick.
    fn pad_quiet(&mut self) {
        if let Some((_, cause)) = &mut self.seen.decided
            && cause == "release"
        {
            *cause = "pad-quiet".into();
        }
    }

    fn tick(&mut self, tick: &Tick) {
        let now = tick.inputs.now;
        let Some(struck) = self.seen.struck else { return };
        let before = std::mem::replace(&mut self.phase, tick.phase);
        let [_, x, y] = tick.sent;
        if now.plus_ns(BEFORE_NS) > struck {
            let t_s = if now < struck { -struck.since_s(now) } else { now.since_s(struck) };
            self.seen.sent.push(Moment { t_s, m_s: libm::hypot(x, y) });
        }
        if now < struck {
            return;
        }
        self.seen.went_on &= tick.phase == Phase::Driving;
        if self.seen.decided.is_none() {
            self.seen.decided = decided(before, tick).map(|cause| (now, cause));
        }
        self.stops |= self.seen.decided.is_some();
        let told_to_turn = tick.sent_counts.iter().any(|it| *it != 0);
        // A stop by the host ends with smaller and smaller speeds.
        self.seen.moved_again |= told_to_turn && self.told_to_stand;
        self.told_to_stand |= self.stops && !told_to_turn;
    }
}

/// How much of a round's time lies behind a moment.
fn share_after(moment: Mono, round: &Round) -> f64 {
    match round.last {
        Some(last) if last < moment => round.at.since_s(moment) / round.at.since_s(last),
        Some(_) | None => 1.0,
    }
}

/// The feedback in a recorded frame.
fn feedback(bytes: &[u8]) -> Option<Feedback> {
    let mut deframer = Deframer::new();
    bytes.iter().find_map(|byte| match parse_from_drivers(deframer.push(*byte)?.ok()?) {
        Ok((_, FromDrivers::Feedback(feedback))) => Some(feedback),
        Ok((_, FromDrivers::Identity(_))) | Err(_) => None,
    })
}

fn hands_began(path: &Path) -> Result<Option<Mono>, RunError> {
    let mut run = Run::open(path)?;
    while let Some(item) = run.next() {
        if let Item::Event(at, Event::Pad { present: true }) = item {
            return Ok(Some(at));
        }
    }
    Ok(None)
}

/// The moment from which the guard that stopped the base counts.
fn guard_knows(path: &Path) -> Result<Option<Mono>, RunError> {
    let mut run = Run::open(path)?;
    let mut before = Phase::Parked;
    while let Some(item) = run.next() {
        let Item::Tick(tick) = item else { continue };
        let now = tick.inputs.now;
        let ago = |ms: u32| Some(Mono::from_ns(now.ns().saturating_sub(u64::from(ms) * 1_000_000)));
        match (before, tick.phase, &tick.cause) {
            (Phase::Driving, Phase::Stopping, _) => {
                // A pad that fell silent counts from its last sign of life; a release from now on.
                let held = tick.inputs.pad.hold > 0.5 && tick.inputs.pad.hold_least > 0.5;
                return Ok(if held { Some(tick.inputs.pad.last_sign) } else { Some(now) });
            }
            (Phase::Driving, Phase::Tripped, Some(Cause::FeedbackQuiet { age_ms, .. })) => {
                return Ok(ago(*age_ms));
            }
            (Phase::Driving, Phase::Tripped, Some(Cause::NotHeard { age_ms, .. })) => {
                return Ok(ago(*age_ms));
            }
            (Phase::Driving, Phase::Tripped, _) => return Ok(Some(now)),
            _ => before = tick.phase,
        }
    }
    Ok(None)
}

/// Whether this tick decided to stop, and why.
fn decided(before: Phase, tick: &Tick) -> Option<String> {
    match (before, tick.phase) {
        (Phase::Driving, Phase::Stopping) if tick.inputs.quit => Some("quit".into()),
        (Phase::Driving, Phase::Stopping) => Some("release".into()),
        (Phase::Ready | Phase::Driving | Phase::Stopping, Phase::Tripped) => {
            tick.cause.as_ref().map(|it| it.code().into())
        }
        _ => None,
    }
}
