//! Local sockets: waiting for many at a time, and who is at the other end.

#![expect(unsafe_code, reason = "poll and SO_PEERCRED, which the standard library does not offer")]

use std::os::fd::{AsRawFd, BorrowedFd};

/// What to wait for on a descriptor, and what came.
#[derive(Clone, Copy, Debug)]
pub struct Wanted<'fd> {
    /// Where.
    pub fd: BorrowedFd<'fd>,
    /// Room to write is waited for; otherwise something to read.
    pub write: bool,
}

/// Waits until one of them can go on, or for `timeout_ms` (negative: for ever). A signal ends the wait early. Ends
/// that were closed count as able to go on: the read or write then tells.
#[must_use]
pub fn wait(wanted: &[Wanted<'_>], timeout_ms: i32) -> Vec<bool> {
    let mut polls: Vec<libc::pollfd> = wanted
        .iter()
        .map(|it| libc::pollfd {
            fd: it.fd.as_raw_fd(),
            events: if it.write { libc::POLLOUT } else { libc::POLLIN },
            revents: 0,
        })
        .collect();
    let count = libc::nfds_t::try_from(polls.len()).unwrap_or(0);
    // SAFETY: the pointer and count are those of a live vector of pollfds.
    let ready = unsafe { libc::poll(polls.as_mut_ptr(), count, timeout_ms) };
    polls.iter().map(|it| ready > 0 && it.revents != 0).collect()
}

/// The process at the other end of a local socket: for the side that connected, the one that listens.
#[must_use]
pub fn peer_pid(socket: BorrowedFd<'_>) -> Option<u32> {
    let mut peer = libc::ucred { pid: 0, uid: 0, gid: 0 };
    let mut size = libc::socklen_t::try_from(size_of::<libc::ucred>()).ok()?;
    // SAFETY: SO_PEERCRED fills one ucred; `peer` and its size are given.
    let result = unsafe {
        libc::getsockopt(
            socket.as_raw_fd(),
            libc::SOL_SOCKET,
            libc::SO_PEERCRED,
            (&raw mut peer).cast(),
            &raw mut size,
        )
    };
    if result == 0 { u32::try_from(peer.pid).ok().filter(|it| *it > 0) } else { None }
}
