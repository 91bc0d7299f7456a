//! A port that several threads may write to while another may take it away: no lock, no allocation, and a descriptor
//! is never closed under somebody's hands.

use std::os::fd::{AsRawFd, BorrowedFd, IntoRawFd, OwnedFd};
use std::sync::atomic::{AtomicI32, AtomicU32, Ordering};

use crate::sys::{clock, tty};

/// The place where an open port lies.
#[derive(Debug)]
pub(super) struct Slot {
    /// The descriptor, or -1.
    fd: AtomicI32,
    /// How many calls are using it at this moment.
    users: AtomicU32,
    openings: AtomicU32,
}

impl Slot {
    pub(super) fn new() -> Self {
        Self { fd: AtomicI32::new(-1), users: AtomicU32::new(0), openings: AtomicU32::new(0) }
    }

    /// Puts an open port in. Only the link's own thread does, and only into an empty slot.
    pub(super) fn put(&self, port: OwnedFd) -> u32 {
        let openings = self.openings.fetch_add(1, Ordering::SeqCst) + 1;
        self.fd.store(port.into_raw_fd(), Ordering::SeqCst);
        openings
    }

    /// Does something with the port, if there is one.
    pub(super) fn with<R>(&self, f: impl FnOnce(BorrowedFd<'_>) -> R) -> Option<R> {
        self.users.fetch_add(1, Ordering::SeqCst);
        let fd = self.fd.load(Ordering::SeqCst);
        let result = (fd >= 0).then(|| tty::borrowed(fd, f));
        self.users.fetch_sub(1, Ordering::SeqCst);
        result
    }

    /// Whether a port is there.
    pub(super) fn is_open(&self) -> bool {
        self.fd.load(Ordering::SeqCst) >= 0
    }

    /// Takes the port out and closes it on a thread of its own, which may take half a minute on a dead device.
    pub(super) fn retire(&self) {
        let fd = self.fd.swap(-1, Ordering::SeqCst);
        if fd < 0 {
            return;
        }
        // Whoever counted itself in before the swap may still use it; soon nobody does.
        while self.users.load(Ordering::SeqCst) > 0 {
            clock::sleep_ms(1);
        }
        let port = tty::owned(fd);
        let number = port.as_raw_fd();
        let dropper = std::thread::Builder::new().name(format!("close {number}")).stack_size(64 * 1024);
        // Without a thread the descriptor is left open rather than let this one wait.
        let _ = dropper.spawn(move || drop(port));
    }
}
