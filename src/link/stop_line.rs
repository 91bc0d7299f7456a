//! The stop line: any thread can pull it at any moment. It waits for nobody, takes no lock and allocates nothing.

use std::sync::Arc;
use std::sync::atomic::{AtomicU64, Ordering};

use super::Tap;
use super::slot::Slot;
use crate::core::io::{Pull, Puller};
use crate::sys::{clock, tty};
use crate::wire::{Direction, stop_on_line, stop_plain};

/// A handle on the stop line of all links; clones are the same line.
#[derive(Clone)]
pub struct StopLine {
    inner: Arc<Inner>,
}

struct Inner {
    /// 0 at rest, else the pull's number above the puller's code (from 1) in the lowest byte.
    state: AtomicU64,
    /// The number of the last pull.
    last: AtomicU64,
    links: Vec<Arm>,
    tap: Tap,
}

/// What a stop on one link would write, encoded ahead of time.
struct Arm {
    slot: Arc<Slot>,
    /// The eight bytes of the Stop before COBS.
    plain: AtomicU64,
}

impl StopLine {
    pub(super) fn new(slots: &[Arc<Slot>], tap: Tap) -> Self {
        let plain = u64::from_le_bytes(stop_plain(0, 1));
        let links =
            slots.iter().map(|slot| Arm { slot: Arc::clone(slot), plain: AtomicU64::new(plain) }).collect();
        Self { inner: Arc::new(Inner { state: AtomicU64::new(0), last: AtomicU64::new(0), links, tap }) }
    }

    /// Pulls it: no motion frame is begun or continued from now on, what is unsent is thrown away, and every open port
    /// gets an empty frame and the stop in one write.
    pub fn pull(&self, by: Puller) -> Pull {
        let number = self.inner.last.fetch_add(1, Ordering::SeqCst) + 1;
        let code = Puller::ALL.iter().position(|it| *it == by).unwrap_or(0) as u64 + 1;
        // The latest pull is the one that a release must name.
        self.inner.state.fetch_max(number << 8 | code, Ordering::SeqCst);
        self.write();
        Pull { number: number as u32, by }
    }

    /// Writes the stop again, as often as it takes until the drivers are heard to be latched.
    pub fn repeat(&self) {
        self.write();
    }

    /// The pull that stands, `None` at rest.
    #[must_use]
    pub fn standing(&self) -> Option<Pull> {
        let state = self.inner.state.load(Ordering::SeqCst);
        let by = *Puller::ALL.get(usize::try_from((state & 0xff).checked_sub(1)?).ok()?)?;
        Some(Pull { number: (state >> 8) as u32, by })
    }

    /// Lets it rest again, unless it has been pulled after the pull of this number.
    pub fn release(&self, number: u32) {
        let state = self.inner.state.load(Ordering::SeqCst);
        if (state >> 8) as u32 == number {
            let _ = self.inner.state.compare_exchange(state, 0, Ordering::SeqCst, Ordering::SeqCst);
        }
    }

    /// What a stop on a link must carry from now on.
    pub fn arm(&self, link: usize, sequence: u8, ramp_ms: u16) {
        if let Some(arm) = self.inner.links.get(link) {
            arm.plain.store(u64::from_le_bytes(stop_plain(sequence, ramp_ms)), Ordering::SeqCst);
        }
    }

    fn write(&self) {
        for (index, arm) in (0_u8..).zip(&self.inner.links) {
            let bytes = stop_on_line(arm.plain.load(Ordering::SeqCst).to_le_bytes());
            let written = arm.slot.with(|port| {
                // A port that fails here is found out by its own thread; the others must not wait for that.
                let _ = tty::discard_unsent(port);
                tty::write(port, &bytes).is_ok()
            });
            if written == Some(true) {
                // Without the empty frame before it.
                (self.inner.tap)(index, Direction::ToDrivers, bytes.get(1..).unwrap_or(&[]), clock::now());
            }
        }
    }
}
