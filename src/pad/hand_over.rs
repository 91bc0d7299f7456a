//! From the pad's thread to the tick: whole states through a ring without locks. A press between two ticks is never lost.

use rtrb::Consumer;

use crate::core::io::{Buttons, PadInput};

/// The tick's end.
pub struct PadFeed {
    pub(super) take: Consumer<PadInput>,
    pub(super) last: PadInput,
}

impl PadFeed {
    /// The pad now, and what happened on it since the last call. Never waits, never allocates.
    pub fn poll(&mut self) -> PadInput {
        // What was told before has been seen.
        self.last.pressed = Buttons::default();
        self.last.hold_least = self.last.hold;
        let waiting = self.take.slots();
        for next in std::iter::from_fn(|| self.take.pop().ok()).take(waiting) {
            self.last = merged(&self.last, &next);
        }
        self.last
    }
}

/// The later state, with the presses of both and the least of the hold over both.
fn merged(before: &PadInput, next: &PadInput) -> PadInput {
    PadInput {
        pressed: if next.present { before.pressed.with(next.pressed) } else { Buttons::default() },
        hold_least: before.hold_least.min(next.hold_least),
        ..*next
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use rtrb::RingBuffer;

    fn input(pressed: Buttons, hold: f64, hold_least: f64) -> PadInput {
        PadInput { present: true, pressed, hold, hold_least, ..PadInput::default() }
    }

    #[test]
    fn presses_and_releases_between_two_ticks_are_not_lost() {
        let (mut tell, take) = RingBuffer::new(8);
        let mut feed = PadFeed { take, last: PadInput::default() };
        tell.push(input(Buttons::default(), 1.0, 1.0)).unwrap();
        assert!((feed.poll().hold - 1.0).abs() < 1e-12);
        tell.push(input(Buttons::READY, 1.0, 0.0)).unwrap();
        tell.push(input(Buttons::default(), 1.0, 1.0)).unwrap();
        let seen = feed.poll();
        assert!(seen.pressed.has(Buttons::READY));
        assert!(seen.hold_least.abs() < 1e-12, "the release was lost");
        let seen = feed.poll();
        assert_eq!(seen.pressed, Buttons::default(), "told twice");
        assert!((seen.hold_least - 1.0).abs() < 1e-12);
    }

    #[test]
    fn an_unplugged_pad_leaves_nothing_behind() {
        let (mut tell, take) = RingBuffer::new(8);
        let mut feed = PadFeed { take, last: PadInput::default() };
        tell.push(input(Buttons::READY, 1.0, 1.0)).unwrap();
        tell.push(PadInput::default()).unwrap();
        let seen = feed.poll();
        assert!(!seen.present && seen.hold.abs() < 1e-12 && seen.pressed == Buttons::default());
    }
}
