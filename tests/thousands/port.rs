//! One port of the host: what is written to it goes on its way to the drivers, waits, or is refused.

use std::collections::VecDeque;

use arrayvec::ArrayVec;
use gripline::standin::sim::Sim;
use gripline::units::Mono;
use gripline::wire::MAX_ON_LINE;

type Chunk = ArrayVec<u8, { MAX_ON_LINE + 8 }>;

/// Frames that the kernel takes while nothing is sent on; a terminal's buffer of 4 KiB is about this.
const QUEUE: usize = 60;

#[derive(Debug)]
pub(crate) struct Port {
    pub(crate) open: bool,
    pub(crate) openings: u32,
    /// The kernel counts what is unsent.
    pub(crate) counts: bool,
    /// Nothing is sent on.
    clogged: bool,
    /// Writing is refused.
    pub(crate) refuses: bool,
    /// From a write until the drivers have it.
    pub(crate) delay_ns: u64,
    unsent: VecDeque<Chunk>,
    under_way: VecDeque<(Mono, Chunk)>,
}

impl Port {
    pub(crate) fn new(delay_ns: u64, counts: bool) -> Self {
        Self {
            open: true,
            openings: 1,
            counts,
            clogged: false,
            refuses: false,
            delay_ns,
            unsent: VecDeque::new(),
            under_way: VecDeque::new(),
        }
    }

    /// Takes the bytes, all or none.
    pub(crate) fn write(&mut self, now: Mono, bytes: &[u8]) -> bool {
        if !self.open || self.refuses || self.unsent.len() >= QUEUE {
            return false;
        }
        let chunk = bytes.iter().copied().collect();
        if self.clogged {
            self.unsent.push_back(chunk);
        } else {
            self.under_way.push_back((now.plus_ns(self.delay_ns), chunk));
        }
        true
    }

    pub(crate) fn discard_unsent(&mut self) {
        self.unsent.clear();
    }

    /// Frames in the kernel's queue, where it counts.
    pub(crate) fn unsent(&self) -> Option<u16> {
        self.counts.then(|| u16::try_from(self.unsent.len()).unwrap())
    }

    pub(crate) fn clog(&mut self, clogged: bool, now: Mono) {
        self.clogged = clogged;
        if !clogged {
            let due = now.plus_ns(self.delay_ns);
            self.under_way.extend(self.unsent.drain(..).map(|it| (due, it)));
        }
    }

    /// The device is pulled out, with all that was in it.
    pub(crate) fn go(&mut self) {
        self.open = false;
        self.unsent.clear();
        self.under_way.clear();
    }

    pub(crate) fn come_back(&mut self) {
        self.open = true;
        self.openings += 1;
    }

    /// Gives the drivers what has come through to them.
    pub(crate) fn deliver(&mut self, now: Mono, link: usize, sim: &mut Sim) {
        while self.under_way.front().is_some_and(|(due, _)| *due <= now) {
            if let Some((_, bytes)) = self.under_way.pop_front() {
                sim.bytes_in(link, &bytes);
            }
        }
    }
}
