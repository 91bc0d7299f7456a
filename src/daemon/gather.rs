//! Gathers what a tick sees, without waiting and without allocating.

use std::sync::atomic::{AtomicBool, Ordering};

use rtrb::Consumer;

use crate::config::PadPlan;
use crate::core::io::{ConsoleInput, Heard, Inputs, LinkInput, PadInput};
use crate::link::{Line, LinkNews, StopLine};
use crate::pad::PadFeed;
use crate::standin::hands::{Hands, Script};
use crate::units::Mono;
use crate::wire::{FromDrivers, flag};

/// Where the pad's state comes from.
pub(super) enum PadSource {
    /// A real gamepad.
    Feed(PadFeed),
    /// A script. It plays once every driver has said that it is simulated, or on stands at once.
    Hands(Box<ScriptedHands>),
}

/// A script and when it may play.
pub(super) struct ScriptedHands {
    pub(super) hands: Hands,
    pub(super) on_stands: bool,
    pub(super) began: Option<Mono>,
    /// A link whose drivers do not say that they are simulated: the script is over.
    pub(super) refused: Option<usize>,
}

impl ScriptedHands {
    pub(super) fn new(script: Script, plan: &PadPlan, on_stands: bool) -> Self {
        Self { hands: Hands::new(script, plan), on_stands, began: None, refused: None }
    }

    /// The script has said that it ends.
    pub(super) fn ended(&self, now: Mono) -> bool {
        self.began.is_some_and(|began| self.hands.ended(now.since_s(began)))
    }
}

/// What other threads ask of the tick.
#[derive(Debug, Default)]
pub(super) struct Asked {
    pub(super) quit: AtomicBool,
    /// The end was asked a second time.
    pub(super) hasty: AtomicBool,
    pub(super) stop: AtomicBool,
    pub(super) reset: AtomicBool,
}

/// News of one link taken in one tick; far more than a line can carry in it.
const NEWS_A_TICK: usize = 256;

/// Collects inputs tick by tick.
pub(super) struct Gather {
    pub(super) inputs: Inputs,
    /// What each link's drivers say of themselves: simulated or not, `None` before they have.
    simulated: arrayvec::ArrayVec<Option<bool>, { crate::core::MAX_LINKS }>,
    frame_bytes: arrayvec::ArrayVec<usize, { crate::core::MAX_LINKS }>,
}

impl Gather {
    pub(super) fn new(channels: impl Iterator<Item = u8>) -> Self {
        let mut inputs = Inputs::default();
        let mut simulated = arrayvec::ArrayVec::new();
        let mut frame_bytes = arrayvec::ArrayVec::new();
        for channels in channels.take(crate::core::MAX_LINKS) {
            inputs.links.push(LinkInput::default());
            simulated.push(None);
            frame_bytes.push(crate::wire::size::drive(usize::from(channels)));
        }
        Self { inputs, simulated, frame_bytes }
    }

    /// Everything that has come since the last tick.
    pub(super) fn gather(
        &mut self,
        (now, due): (Mono, Mono),
        pad: &mut PadSource,
        lines: &mut [Line],
        news: &mut [Consumer<LinkNews>],
        stop: &StopLine,
        asked: &Asked,
    ) {
        self.inputs.now = now;
        self.inputs.due = due;
        for link in &mut self.inputs.links {
            link.identity = None;
            link.feedback = None;
            link.status_seen = 0;
        }
        // Bounded, so that a line that never stops talking cannot hold the tick.
        for link in news {
            for it in std::iter::from_fn(|| link.pop().ok()).take(NEWS_A_TICK) {
                self.take(it, lines);
            }
        }
        for ((link, line), bytes) in self.inputs.links.iter_mut().zip(lines.iter()).zip(&self.frame_bytes) {
            link.unsent =
                line.unsent_bytes().map(|it| u16::try_from(it.div_ceil((*bytes).max(1))).unwrap_or(u16::MAX));
        }
        self.inputs.console = ConsoleInput {
            stop: asked.stop.swap(false, Ordering::Relaxed),
            reset: asked.reset.swap(false, Ordering::Relaxed),
        };
        self.inputs.quit |= asked.quit.load(Ordering::Relaxed);
        self.inputs.stop_line = stop.standing();
        self.inputs.pad = match pad {
            PadSource::Feed(feed) => feed.poll(),
            PadSource::Hands(script) => self.play(script, now),
        };
    }

    fn take(&mut self, news: LinkNews, lines: &mut [Line]) {
        let (index, link) = match &news {
            LinkNews::Opened { link, .. }
            | LinkNews::Closed { link }
            | LinkNews::Heard { link, .. }
            | LinkNews::Dropped { link, .. } => {
                (usize::from(*link), self.inputs.links.get_mut(usize::from(*link)))
            }
        };
        let Some(link) = link else { return };
        match news {
            LinkNews::Opened { openings, .. } => {
                *link = LinkInput { open: true, openings, dropped: link.dropped, ..LinkInput::default() };
                if let Some(line) = lines.get_mut(index) {
                    line.restart();
                }
            }
            LinkNews::Closed { .. } => {
                *link = LinkInput { openings: link.openings, dropped: link.dropped, ..LinkInput::default() };
                if let Some(it) = self.simulated.get_mut(index) {
                    *it = None;
                }
            }
            LinkNews::Heard { at, message, .. } => match message {
                FromDrivers::Identity(identity) => {
                    if let Some(it) = self.simulated.get_mut(index) {
                        *it = Some(identity.flags & flag::SIMULATED != 0);
                    }
                    link.identity = Some(identity);
                }
                FromDrivers::Feedback(feedback) => {
                    link.status_seen |= feedback.status;
                    link.feedback = Some(Heard { at, feedback });
                }
            },
            LinkNews::Dropped { count, .. } => link.dropped = count,
        }
    }

    /// A script plays only on drivers that are known not to move anything, or on stands.
    fn play(&self, script: &mut ScriptedHands, now: Mono) -> PadInput {
        if !script.on_stands && script.refused.is_none() {
            script.refused = self.simulated.iter().position(|it| *it == Some(false));
        }
        let may =
            script.on_stands || script.began.is_some() || self.simulated.iter().all(|it| *it == Some(true));
        if !may || script.refused.is_some() {
            // As if the pad had been pulled out: nothing starts, and what moves is stopped.
            return PadInput::default();
        }
        let began = *script.began.get_or_insert(now);
        script.hands.at(now.since_s(began), now)
    }
}
