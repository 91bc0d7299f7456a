//! Serial ports and pseudo-terminals as plain descriptors that never wait.

#![expect(
    unsafe_code,
    reason = "poll and the calls on a tty's queues, which std lacks; serialport gives its descriptor away as a number"
)]

use std::fs::{File, OpenOptions};
use std::io;
use std::os::fd::{AsRawFd, BorrowedFd, FromRawFd, IntoRawFd, OwnedFd};
use std::os::unix::fs::OpenOptionsExt;
use std::path::{Path, PathBuf};
use std::time::Duration;

use super::tty::{make_raw, open_pty, set_nonblocking};

/// Opens a serial port (or the slave of a pseudo-terminal) raw, for this process alone, at a baud rate that was read
/// back. Reads and writes never wait.
///
/// # Errors
/// When it is absent, busy, no terminal, not permitted, or does not take the baud rate.
pub fn open_nonblocking(path: &Path, baud: u32) -> io::Result<File> {
    let settings = serialport::new(path.to_string_lossy(), baud).timeout(Duration::from_millis(1));
    let port = settings.open_native()?;
    let got = serialport::SerialPort::baud_rate(&port)?;
    if got != baud {
        return Err(io::Error::other(format!("it took {got} baud instead of {baud}")));
    }
    // SAFETY: `into_raw_fd` gives the descriptor away; nobody else owns it from here on.
    let port = unsafe { OwnedFd::from_raw_fd(port.into_raw_fd()) };
    set_nonblocking(&port)?;
    Ok(File::from(port))
}

/// A fresh pseudo-terminal that outlives whoever opens it.
#[derive(Debug)]
pub struct KeptPty {
    /// The end behind the port; reads and writes never wait.
    pub master: File,
    /// The port's own end. As long as it is open the port lives and keeps its settings, whoever opens and closes it.
    pub slave: File,
    /// Where others open the port.
    pub path: PathBuf,
}

/// Opens a fresh pseudo-terminal at both ends, raw.
///
/// # Errors
/// When the system has none to give.
pub fn open_kept_pty() -> io::Result<KeptPty> {
    let (master, path) = open_pty()?;
    set_nonblocking(&master)?;
    let slave = OpenOptions::new().read(true).write(true).custom_flags(libc::O_NOCTTY).open(&path)?;
    make_raw(&slave)?;
    Ok(KeptPty { master: File::from(master), slave, path })
}

/// Waits until one of the descriptors can be read (or has failed), at most `timeout_ms`. A signal ends it early.
pub fn wait_any<'a>(descriptors: impl IntoIterator<Item = BorrowedFd<'a>>, timeout_ms: u16) {
    let poll = |fd: BorrowedFd<'_>| libc::pollfd { fd: fd.as_raw_fd(), events: libc::POLLIN, revents: 0 };
    let mut polls: arrayvec::ArrayVec<libc::pollfd, 32> =
        descriptors.into_iter().take(32).map(poll).collect();
    let count = libc::nfds_t::try_from(polls.len()).unwrap_or(0);
    // SAFETY: `polls` holds `count` valid entries and lives through the call; the descriptors are borrowed, so open.
    unsafe { libc::poll(polls.as_mut_ptr(), count, i32::from(timeout_ms)) };
}

/// Whether bytes have arrived at a tty that nobody has read yet.
#[must_use]
pub fn has_unread(tty: BorrowedFd<'_>) -> bool {
    let mut bytes: libc::c_int = 0;
    // SAFETY: the descriptor is borrowed, so open; `bytes` is what the call fills.
    unsafe { libc::ioctl(tty.as_raw_fd(), libc::FIONREAD, &raw mut bytes) == 0 && bytes > 0 }
}

/// Makes a tty that nobody reads ready for the next user: throws away what has arrived, and ends the exclusive use that
/// a killed user leaves behind as long as anybody has the tty open.
pub fn make_ready(tty: BorrowedFd<'_>) {
    // SAFETY: the descriptor is borrowed, so open; no pointers are passed. A failure leaves things as they are.
    unsafe {
        libc::tcflush(tty.as_raw_fd(), libc::TCIFLUSH);
        libc::ioctl(tty.as_raw_fd(), libc::TIOCNXCL);
    }
}

#[cfg(test)]
mod tests {
    use std::io::{Read, Write};
    use std::os::fd::AsFd;

    use super::*;

    fn is_exclusive(tty: &File) -> bool {
        let mut exclusive: libc::c_int = 0;
        // SAFETY: the descriptor is open and `exclusive` is what the call fills.
        assert_eq!(unsafe { libc::ioctl(tty.as_raw_fd(), libc::TIOCGEXCL, &raw mut exclusive) }, 0);
        exclusive != 0
    }

    #[test]
    fn a_tty_is_made_ready_for_the_next_user() {
        let mut pty = open_kept_pty().unwrap();
        // SAFETY: the descriptor is open; no pointers are passed.
        assert_eq!(unsafe { libc::ioctl(pty.slave.as_raw_fd(), libc::TIOCEXCL) }, 0);
        assert!(is_exclusive(&pty.slave) && !has_unread(pty.slave.as_fd()));
        pty.master.write_all(b"stale").unwrap();
        wait_any([pty.slave.as_fd()], 10_000);
        assert!(has_unread(pty.slave.as_fd()));
        make_ready(pty.slave.as_fd());
        assert!(!is_exclusive(&pty.slave) && !has_unread(pty.slave.as_fd()));
    }

    #[test]
    fn every_byte_passes_a_pseudo_terminal_as_it_is() {
        let KeptPty { mut master, mut slave, path } = open_kept_pty().unwrap();
        let all: Vec<u8> = (0..=u8::MAX).collect();
        let mut got = vec![0; all.len()];
        master.write_all(&all).unwrap();
        slave.read_exact(&mut got).unwrap();
        assert_eq!(got, all);
        slave.write_all(&all).unwrap();
        wait_any([master.as_fd()], 10_000);
        master.read_exact(&mut got).unwrap();
        assert_eq!(got, all);
        assert_eq!(master.read(&mut got).unwrap_err().kind(), io::ErrorKind::WouldBlock);
        assert!(open_nonblocking(&path, 460_800).is_ok());
    }

    #[test]
    fn what_is_no_port_is_refused() {
        for path in ["/dev/null", "/dev/no-such-port", "/"] {
            assert!(open_nonblocking(Path::new(path), 115_200).is_err(), "{path}");
        }
    }
}
