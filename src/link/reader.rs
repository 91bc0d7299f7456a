//! One thread a link: opens the port, reads, cuts frames, tells the tick, opens anew after a loss.

use std::os::fd::{AsFd, OwnedFd};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

use arrayvec::ArrayVec;
use rtrb::{Consumer, Producer, PushError, RingBuffer};

use super::slot::Slot;
use super::{Line, LinkError, StopLine, Tap, open};
use crate::config::{LinkPlan, Plan};
use crate::core::io::Puller;
use crate::sys::clock;
use crate::sys::tty::{self, Polled};
use crate::units::Mono;
use crate::wire::{Deframer, Direction, FromDrivers, MAX_ON_LINE, parse_from_drivers};

/// What a link's thread tells the tick.
#[derive(Clone, Debug, PartialEq)]
pub enum LinkNews {
    /// The port is open.
    Opened {
        /// The link.
        link: u8,
        /// How often it has been opened.
        openings: u32,
        /// The adaptor took the low-latency mode.
        low_latency: bool,
    },
    /// The port is gone.
    Closed {
        /// The link.
        link: u8,
    },
    /// A frame came.
    Heard {
        /// The link.
        link: u8,
        /// When its last byte was read.
        at: Mono,
        /// Its sequence.
        sequence: u8,
        /// What it said.
        message: FromDrivers,
    },
    /// Frames failed length, kind or check, or the tick did not take them in time.
    Dropped {
        /// The link.
        link: u8,
        /// How many since the start.
        count: u32,
    },
}

/// The tick takes news once a tick: this many frames can wait, far more than come in the longest hiccup that does not
/// trip.
const NEWS: usize = 256;
/// Reopening is tried after this, then twice as long each time, at most [`BACK_OFF_MOST_MS`].
const BACK_OFF_MS: u64 = 50;
const BACK_OFF_MOST_MS: u64 = 1600;
/// How long a read waits: so often the exclusive mode is asked again and the end of the program is looked for.
const READ_WAIT_MS: i32 = 500;

/// All links of a plan, started.
pub struct Links {
    /// The tick's handles, in the order of the plan.
    pub lines: Vec<Line>,
    /// What the links' threads tell, in the order of the plan. A ring without locks: the tick never waits for a thread
    /// that was interrupted while it was telling something.
    pub news: Vec<Consumer<LinkNews>>,
    /// The stop line over all of them.
    pub stop: StopLine,
}

/// Opens every port and starts a thread for each. With `wait`, ports that are not there yet are tried again by their
/// threads; without it that is an error.
///
/// # Errors
/// The first port that cannot be opened, unless it is absent and `wait`.
pub fn start(plan: &Plan, wait: bool, tap: Tap) -> Result<Links, LinkError> {
    let slots: Vec<Arc<Slot>> = plan.links.iter().map(|_| Arc::new(Slot::new())).collect();
    let stop = StopLine::new(&slots, Arc::clone(&tap));
    let mut lines = Vec::new();
    let mut readers = Vec::new();
    let mut news = Vec::new();
    for (index, (link, slot)) in (0_u8..).zip(plan.links.iter().zip(&slots)) {
        let opened = match open::open(&link.name, &link.port, link.baud) {
            Ok(opened) => Some(opened),
            // What is in use, not permitted or no port at all does not mend itself by waiting.
            Err(LinkError::Absent { .. }) if wait => None,
            Err(error) => return Err(error),
        };
        lines.push(Line {
            index,
            slot: Arc::clone(slot),
            stop: stop.clone(),
            tap: Arc::clone(&tap),
            rest: ArrayVec::new(),
        });
        let (tell, hear) = RingBuffer::new(NEWS);
        news.push(hear);
        let reader = Reader {
            index,
            link: link.clone(),
            slot: Arc::clone(slot),
            stop: stop.clone(),
            tap: Arc::clone(&tap),
            tell,
            dropped: 0,
        };
        readers.push((reader, opened));
    }
    for (mut reader, opened) in readers {
        let name = format!("link {}", reader.link.name).chars().take(15).collect();
        let thread = std::thread::Builder::new().name(name).stack_size(128 * 1024);
        let path = reader.link.port.clone();
        let link = reader.link.name.clone();
        if let Some((port, quick)) = opened {
            reader.opened(port, quick);
        }
        thread.spawn(move || reader.run()).map_err(|source| LinkError::Other { link, path, source })?;
    }
    Ok(Links { lines, news, stop })
}

struct Reader {
    index: u8,
    link: LinkPlan,
    slot: Arc<Slot>,
    stop: StopLine,
    tap: Tap,
    tell: Producer<LinkNews>,
    dropped: u32,
}

/// Set when the program ends, so that a port that goes away then is no fault.
pub(super) static ENDING: AtomicBool = AtomicBool::new(false);

/// The program ends: ports that go away from now on are no fault.
pub fn ending() {
    ENDING.store(true, Ordering::SeqCst);
}

impl Reader {
    fn run(&mut self) {
        let mut back_off_ms = BACK_OFF_MS;
        loop {
            if self.slot.is_open() {
                self.read_until_gone();
                if ENDING.load(Ordering::SeqCst) {
                    return;
                }
                // The other links must stop at once; this one's drivers stop by themselves.
                self.stop.pull(Puller::LinkGone);
                self.slot.retire();
                self.news(LinkNews::Closed { link: self.index });
                back_off_ms = BACK_OFF_MS;
            }
            clock::sleep_ms(back_off_ms);
            match open::open(&self.link.name, &self.link.port, self.link.baud) {
                Ok((port, quick)) => self.opened(port, quick),
                Err(_) => back_off_ms = (back_off_ms * 2).min(BACK_OFF_MOST_MS),
            }
        }
    }

    fn opened(&mut self, port: OwnedFd, low_latency: bool) {
        let _ = tty::keep_exclusive(port.as_fd());
        let openings = self.slot.put(port);
        self.news(LinkNews::Opened { link: self.index, openings, low_latency });
    }

    /// Reads frames until the device is gone.
    fn read_until_gone(&mut self) {
        let slot = Arc::clone(&self.slot);
        slot.with(|port| {
            let mut deframer = Deframer::new();
            let mut coded: ArrayVec<u8, MAX_ON_LINE> = ArrayVec::new();
            let mut bytes = [0; 512];
            loop {
                match tty::wait_readable(port, READ_WAIT_MS) {
                    Polled::Nothing => {
                        if ENDING.load(Ordering::SeqCst) || tty::keep_exclusive(port).is_err() {
                            return;
                        }
                        continue;
                    }
                    Polled::Gone => return,
                    Polled::Readable => {}
                }
                let got = match tty::read(port, &mut bytes) {
                    Ok(0) => return,
                    Ok(n) => bytes.get(..n).unwrap_or(&[]),
                    Err(error) if error.kind() == std::io::ErrorKind::WouldBlock => continue,
                    Err(error) if error.kind() == std::io::ErrorKind::Interrupted => continue,
                    Err(_) => return,
                };
                let at = clock::now();
                for &byte in got {
                    let _ = coded.try_push(byte);
                    if let Some(frame) = deframer.push(byte) {
                        let parsed = frame.and_then(parse_from_drivers);
                        (self.tap)(self.index, Direction::FromDrivers, &coded, at);
                        match parsed {
                            Ok((sequence, message)) => {
                                self.news(LinkNews::Heard { link: self.index, at, sequence, message });
                            }
                            Err(_) => self.drop_one(),
                        }
                    }
                    if byte == 0 {
                        coded.clear();
                    }
                }
            }
        });
    }

    fn drop_one(&mut self) {
        self.dropped = self.dropped.saturating_add(1);
        let _ = self.tell.push(LinkNews::Dropped { link: self.index, count: self.dropped });
    }

    fn news(&mut self, news: LinkNews) {
        let must = matches!(news, LinkNews::Opened { .. } | LinkNews::Closed { .. });
        let mut left = self.tell.push(news);
        if !must && left.is_err() {
            self.drop_one();
            return;
        }
        // Told once only, so it waits for room; nothing depends on this thread meanwhile.
        while let Err(PushError::Full(news)) = left {
            clock::sleep_ms(1);
            left = self.tell.push(news);
        }
    }
}
