//! Serial ports and pseudo-terminals: the calls that must not wait.

#![expect(
    unsafe_code,
    reason = "ioctls and raw reads and writes on descriptors; each call says what makes it sound"
)]

use std::ffi::CStr;
use std::io;
use std::os::fd::{AsRawFd, BorrowedFd, FromRawFd, OwnedFd, RawFd};
use std::path::PathBuf;

fn checked(result: libc::c_int) -> io::Result<libc::c_int> {
    if result < 0 { Err(io::Error::last_os_error()) } else { Ok(result) }
}

/// A new pseudo-terminal in raw mode: its master, and the path of its slave.
///
/// # Errors
/// When the system gives none.
pub fn open_pty() -> io::Result<(OwnedFd, PathBuf)> {
    // SAFETY: no memory is passed; the descriptor returned is ours.
    let master = unsafe {
        let fd = checked(libc::posix_openpt(libc::O_RDWR | libc::O_NOCTTY | libc::O_CLOEXEC))?;
        OwnedFd::from_raw_fd(fd)
    };
    let mut name = [0 as libc::c_char; 128];
    // SAFETY: the descriptor is a pty master; `name` is long enough for any pts path and is ended with a zero.
    let path = unsafe {
        checked(libc::grantpt(master.as_raw_fd()))?;
        checked(libc::unlockpt(master.as_raw_fd()))?;
        checked(-libc::ptsname_r(master.as_raw_fd(), name.as_mut_ptr(), name.len()).abs())?;
        CStr::from_ptr(name.as_ptr())
    };
    let path = PathBuf::from(path.to_string_lossy().into_owned());
    make_raw(&master)?;
    Ok((master, path))
}

/// No echo, no line editing, every byte as it is.
///
/// # Errors
/// When the descriptor is no terminal.
pub fn make_raw(fd: &impl AsRawFd) -> io::Result<()> {
    // SAFETY: an all-zero termios is a valid value for the calls to fill in.
    unsafe {
        let mut termios: libc::termios = std::mem::zeroed();
        checked(libc::tcgetattr(fd.as_raw_fd(), &raw mut termios))?;
        libc::cfmakeraw(&raw mut termios);
        checked(libc::tcsetattr(fd.as_raw_fd(), libc::TCSANOW, &raw const termios))?;
    }
    Ok(())
}

/// Reads and writes on this descriptor never wait from now on.
///
/// # Errors
/// When the descriptor is closed.
pub fn set_nonblocking(fd: &impl AsRawFd) -> io::Result<()> {
    // SAFETY: fcntl with integer arguments only.
    unsafe {
        let flags = checked(libc::fcntl(fd.as_raw_fd(), libc::F_GETFL))?;
        checked(libc::fcntl(fd.as_raw_fd(), libc::F_SETFL, flags | libc::O_NONBLOCK))?;
    }
    Ok(())
}

/// One write; on a non-blocking descriptor it never waits.
///
/// # Errors
/// As the system says; `WouldBlock` when there is no room.
pub fn write(fd: BorrowedFd<'_>, bytes: &[u8]) -> io::Result<usize> {
    // SAFETY: the pointer and length are those of a live slice.
    let written = unsafe { libc::write(fd.as_raw_fd(), bytes.as_ptr().cast(), bytes.len()) };
    usize::try_from(written).map_err(|_| io::Error::last_os_error())
}

/// One read; on a non-blocking descriptor it never waits. 0: the other end is gone.
///
/// # Errors
/// As the system says; `WouldBlock` when nothing is there.
pub fn read(fd: BorrowedFd<'_>, bytes: &mut [u8]) -> io::Result<usize> {
    // SAFETY: the pointer and length are those of a live, writable slice.
    let got = unsafe { libc::read(fd.as_raw_fd(), bytes.as_mut_ptr().cast(), bytes.len()) };
    usize::try_from(got).map_err(|_| io::Error::last_os_error())
}

/// What a wait for bytes ended with.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Polled {
    /// Something can be read (perhaps the news that the other end is gone).
    Readable,
    /// The time is over.
    Nothing,
    /// The device is gone.
    Gone,
}

/// Waits until something can be read, at most `timeout_ms`. A signal ends the wait early.
#[must_use]
pub fn wait_readable(fd: BorrowedFd<'_>, timeout_ms: i32) -> Polled {
    let mut poll = libc::pollfd { fd: fd.as_raw_fd(), events: libc::POLLIN, revents: 0 };
    // SAFETY: one valid pollfd is passed, with its count.
    let n = unsafe { libc::poll(&raw mut poll, 1, timeout_ms) };
    if n <= 0 {
        Polled::Nothing
    } else if poll.revents & libc::POLLIN != 0 {
        Polled::Readable
    } else {
        Polled::Gone
    }
}

/// Bytes that are written but not yet sent. Pseudo-terminals do not count.
///
/// # Errors
/// When the device is gone.
pub fn unsent(fd: BorrowedFd<'_>) -> io::Result<usize> {
    let mut count: libc::c_int = 0;
    // SAFETY: TIOCOUTQ writes one int.
    checked(unsafe { libc::ioctl(fd.as_raw_fd(), libc::TIOCOUTQ, &raw mut count) })?;
    Ok(usize::try_from(count).unwrap_or(0))
}

/// Throws away what is written but not yet sent.
///
/// # Errors
/// When the device is gone.
pub fn discard_unsent(fd: BorrowedFd<'_>) -> io::Result<()> {
    // SAFETY: no memory is passed.
    checked(unsafe { libc::tcflush(fd.as_raw_fd(), libc::TCOFLUSH) }).map(drop)
}

/// Keeps others from opening the device; the system takes it back when somebody with privileges tries, so it is asked
/// again now and then.
///
/// # Errors
/// When the device is gone.
pub fn keep_exclusive(fd: BorrowedFd<'_>) -> io::Result<()> {
    // SAFETY: no memory is passed.
    checked(unsafe { libc::ioctl(fd.as_raw_fd(), libc::TIOCEXCL) }).map(drop)
}

/// Whether the device is a pseudo-terminal: major numbers 136 to 143 are their slaves (kernel, devices.txt).
#[must_use]
pub fn is_pty(fd: BorrowedFd<'_>) -> bool {
    // SAFETY: an all-zero stat is valid for the call to fill in.
    let device = unsafe {
        let mut stat: libc::stat = std::mem::zeroed();
        if libc::fstat(fd.as_raw_fd(), &raw mut stat) != 0 {
            return false;
        }
        stat.st_rdev
    };
    (136..=143).contains(&libc::major(device))
}

/// Characters in a line of the terminal on stdout; 80 where it does not say.
#[must_use]
pub fn columns() -> usize {
    let mut size = libc::winsize { ws_row: 0, ws_col: 0, ws_xpixel: 0, ws_ypixel: 0 };
    // SAFETY: TIOCGWINSZ fills one winsize.
    let told = unsafe { libc::ioctl(libc::STDOUT_FILENO, libc::TIOCGWINSZ, &raw mut size) } == 0;
    if told && size.ws_col > 0 { usize::from(size.ws_col) } else { 80 }
}

/// `struct serial_struct` of linux/serial.h as far as it is needed: 72 bytes on 64-bit machines, `flags` at 16.
#[repr(C, align(8))]
struct SerialStruct {
    head: [libc::c_int; 4],
    flags: libc::c_int,
    rest: [u8; 108],
}

const ASYNC_LOW_LATENCY: libc::c_int = 0x2000;

/// Asks the adaptor not to wait for more bytes before it hands them over (FTDI: 1 ms instead of 16). Many devices have
/// no such thing: false then.
#[must_use]
pub fn ask_low_latency(fd: BorrowedFd<'_>) -> bool {
    let mut serial = SerialStruct { head: [0; 4], flags: 0, rest: [0; 108] };
    // SAFETY: the struct is larger than the kernel's serial_struct on every Linux architecture (at most 72 bytes),
    // and both calls only read or write that much of it.
    unsafe {
        if libc::ioctl(fd.as_raw_fd(), libc::TIOCGSERIAL, &raw mut serial) != 0 {
            return false;
        }
        serial.flags |= ASYNC_LOW_LATENCY;
        libc::ioctl(fd.as_raw_fd(), libc::TIOCSSERIAL, &raw const serial) == 0
    }
}

/// Borrows a descriptor by its number for one call.
///
/// The caller must know that it stays open meanwhile; [`crate::link`] does by counting users.
pub(crate) fn borrowed<R>(fd: RawFd, f: impl FnOnce(BorrowedFd<'_>) -> R) -> R {
    // SAFETY: the one caller holds the slot's user count, which keeps the descriptor from being closed.
    f(unsafe { BorrowedFd::borrow_raw(fd) })
}

/// Takes a descriptor by its number into ownership, to be closed when dropped. The caller must be its only owner.
pub(crate) fn owned(fd: RawFd) -> OwnedFd {
    // SAFETY: the one caller has just taken the number out of its slot, where it was put from an `OwnedFd`.
    unsafe { OwnedFd::from_raw_fd(fd) }
}
