//! Who has a device node open, and waiting until something can be read.

#![expect(unsafe_code, reason = "inotify, poll and the tty queue's calls; std has none of them")]

use std::ffi::CString;
use std::fs::File;
use std::io::{self, Read};
use std::os::fd::{AsFd, AsRawFd, BorrowedFd, FromRawFd};
use std::os::unix::ffi::OsStrExt;
use std::path::Path;

/// Counts the openings of a device node by others, from the moment of the first look on.
#[derive(Debug)]
pub struct Opens {
    inotify: File,
    open: u32,
}

impl Opens {
    /// Begins to count.
    ///
    /// # Errors
    /// When the kernel has no inotify to give, or `path` is not there.
    pub fn of(path: &Path) -> io::Result<Self> {
        let path = CString::new(path.as_os_str().as_bytes())?;
        // SAFETY: no pointers are passed.
        let fd = unsafe { libc::inotify_init1(libc::IN_NONBLOCK | libc::IN_CLOEXEC) };
        if fd < 0 {
            return Err(io::Error::last_os_error());
        }
        // SAFETY: `fd` is a fresh descriptor that nobody else owns.
        let inotify = unsafe { File::from_raw_fd(fd) };
        // SAFETY: `path` is a string that ends in a zero byte and lives through the call.
        let watch = unsafe { libc::inotify_add_watch(fd, path.as_ptr(), libc::IN_OPEN | libc::IN_CLOSE) };
        if watch < 0 { Err(io::Error::last_os_error()) } else { Ok(Self { inotify, open: 0 }) }
    }

    /// How many descriptors of others are open now, and whether one was closed since the last call.
    pub fn look(&mut self) -> (u32, bool) {
        let mut closed = false;
        let mut buffer = [0_u8; 1024];
        while let Ok(length @ 1..) = self.inotify.read(&mut buffer) {
            let mut rest = buffer.get(..length).unwrap_or_default();
            // struct inotify_event: wd i32, mask u32, cookie u32, len u32, name; a watched file gives no name.
            while let Some((event, after)) = rest.split_first_chunk::<16>() {
                let [_, _, _, _, m0, m1, m2, m3, _, _, _, _, l0, l1, l2, l3] = *event;
                let mask = u32::from_ne_bytes([m0, m1, m2, m3]);
                if mask & libc::IN_OPEN != 0 {
                    self.open += 1;
                }
                if mask & libc::IN_CLOSE != 0 {
                    self.open = self.open.saturating_sub(1);
                    closed = true;
                }
                let name = usize::try_from(u32::from_ne_bytes([l0, l1, l2, l3])).unwrap_or(usize::MAX);
                rest = after.get(name..).unwrap_or_default();
            }
        }
        (self.open, closed)
    }
}

impl AsFd for Opens {
    fn as_fd(&self) -> BorrowedFd<'_> {
        self.inotify.as_fd()
    }
}

/// Waits until one of the descriptors can be read (or has failed), at most `timeout_ms`. A signal ends it early.
pub fn wait_readable<'a>(descriptors: impl IntoIterator<Item = BorrowedFd<'a>>, timeout_ms: u16) {
    let poll = |fd: BorrowedFd<'_>| libc::pollfd { fd: fd.as_raw_fd(), events: libc::POLLIN, revents: 0 };
    let mut polls: arrayvec::ArrayVec<libc::pollfd, 32> = descriptors.into_iter().take(32).map(poll).collect();
    let count = libc::nfds_t::try_from(polls.len()).unwrap_or(0);
    // SAFETY: `polls` holds `count` valid entries and lives through the call; the descriptors are borrowed, so open.
    unsafe { libc::poll(polls.as_mut_ptr(), count, i32::from(timeout_ms)) };
}

/// Throws away what has arrived at a tty and was not read.
pub fn discard_unread(tty: BorrowedFd<'_>) {
    // SAFETY: the descriptor is borrowed, so open; no pointers are passed. A failure leaves the bytes, no more.
    unsafe { libc::tcflush(tty.as_raw_fd(), libc::TCIFLUSH) };
}
