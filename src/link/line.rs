//! Writing to one link from the tick.

use std::io;
use std::sync::Arc;

use arrayvec::ArrayVec;

use super::slot::Slot;
use super::{StopLine, Tap};
use crate::sys::{clock, tty};
use crate::wire::{Direction, MAX_ON_LINE};

/// What became of a frame.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Sent {
    /// The kernel has it whole.
    Whole,
    /// A part of it; the rest is sent first the next time.
    Partly,
    /// Nothing of it.
    Blocked,
    /// The port is gone.
    Gone,
    /// The stop line stands: a motion frame is not begun.
    HeldByStopLine,
}

/// The tick's handle on one link.
pub struct Line {
    pub(super) index: u8,
    pub(super) slot: Arc<Slot>,
    pub(super) stop: StopLine,
    pub(super) tap: Tap,
    /// What is still to be sent of a frame that was cut off.
    pub(super) rest: ArrayVec<u8, MAX_ON_LINE>,
}

impl Line {
    /// Sends a whole frame with its end mark. Never waits.
    pub fn send(&mut self, frame: &[u8], motion: bool) -> Sent {
        if self.stop.standing().is_some() {
            // The empty frame before the stop has ended what was cut off.
            self.rest.clear();
            if motion {
                return Sent::HeldByStopLine;
            }
        }
        if !self.rest.is_empty() {
            match self.put(&self.rest) {
                Ok(n) if n == self.rest.len() => self.rest.clear(),
                Ok(n) => {
                    self.rest.drain(..n);
                    return Sent::Blocked;
                }
                Err(sent) => return sent,
            }
        }
        match self.put(frame) {
            Ok(n) if n == frame.len() => {
                (self.tap)(self.index, Direction::ToDrivers, frame, clock::now());
                Sent::Whole
            }
            Ok(0) => Sent::Blocked,
            Ok(n) => {
                let _ = self.rest.try_extend_from_slice(frame.get(n..).unwrap_or(&[]));
                Sent::Partly
            }
            Err(sent) => sent,
        }
    }

    fn put(&self, bytes: &[u8]) -> Result<usize, Sent> {
        match self.slot.with(|port| tty::write(port, bytes)) {
            Some(Ok(n)) => Ok(n),
            Some(Err(error)) if error.kind() == io::ErrorKind::WouldBlock => Err(Sent::Blocked),
            Some(Err(error)) if error.kind() == io::ErrorKind::Interrupted => Err(Sent::Blocked),
            Some(Err(_)) | None => Err(Sent::Gone),
        }
    }

    /// Bytes that the kernel has not sent yet; `None` where it does not count, or without a port.
    #[must_use]
    pub fn unsent_bytes(&self) -> Option<usize> {
        self.slot.with(|port| if tty::is_pty(port) { None } else { tty::unsent(port).ok() }).flatten()
    }

    /// A port is open.
    #[must_use]
    pub fn is_open(&self) -> bool {
        self.slot.is_open()
    }

    /// Forgets a frame that was cut off, as after the port was opened anew.
    pub fn restart(&mut self) {
        self.rest.clear();
    }
}
