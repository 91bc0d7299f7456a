//! How things stood at the last tick, for whoever wants to look. The tick never waits here: while somebody reads, it
//! leaves the board as it was and writes it at its next turn.

use std::sync::{Mutex, PoisonError};

use crate::core::event::{Request, Wait};
use crate::core::io::{Outputs, Phase, View};
use crate::core::{Cause, Event};
use crate::units::Mono;

/// How things stood at a tick.
#[derive(Clone, Debug)]
pub(super) struct Standing {
    /// When that tick was.
    pub(super) at: Mono,
    pub(super) phase: Phase,
    pub(super) cause: Option<Cause>,
    pub(super) view: View,
    /// The last reset that was refused, and why.
    pub(super) refused: Option<(Mono, Wait)>,
}

/// The board.
#[derive(Debug, Default)]
pub(super) struct Board(Mutex<Option<Standing>>);

impl Board {
    /// The tick writes.
    pub(super) fn write(&self, now: Mono, out: &Outputs) {
        let Ok(mut board) = self.0.try_lock() else { return };
        let refused = out.events.iter().find_map(|it| {
            let Event::Refused { request: Request::Reset, wait } = it else { return None };
            Some((now, *wait))
        });
        let refused = refused.or(board.as_ref().and_then(|it| it.refused));
        *board =
            Some(Standing { at: now, phase: out.phase, cause: out.cause, view: out.view.clone(), refused });
    }

    /// Somebody looks; `None` before the first tick.
    pub(super) fn read(&self) -> Option<Standing> {
        self.0.lock().unwrap_or_else(PoisonError::into_inner).clone()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_tick_does_not_wait_for_a_reader() {
        let board = Board::default();
        let mut out = Outputs { phase: Phase::Ready, ..Outputs::default() };
        board.write(Mono::from_ns(1), &out);
        out.phase = Phase::Driving;
        let reader = board.0.lock().unwrap();
        board.write(Mono::from_ns(2), &out);
        drop(reader);
        assert_eq!(board.read().unwrap().phase, Phase::Ready, "written while it was being read");
        board.write(Mono::from_ns(3), &out);
        assert_eq!(board.read().unwrap().phase, Phase::Driving);
    }

    #[test]
    fn a_refusal_is_kept_until_somebody_has_read_it() {
        let board = Board::default();
        let mut out = Outputs::default();
        out.events.push(Event::Refused { request: Request::Reset, wait: Wait::ResetAtPad });
        board.write(Mono::from_ns(1), &out);
        board.write(Mono::from_ns(2), &Outputs::default());
        assert_eq!(board.read().unwrap().refused, Some((Mono::from_ns(1), Wait::ResetAtPad)));
    }
}
