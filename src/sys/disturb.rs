//! What the drill does to a running drive, its own child, from outside: signals, one thread held still, no room on the
//! disk, the wall clock stepped. All of it on the program as it is, without switches inside.

#![expect(unsafe_code, reason = "kill, ptrace, prlimit and clock_adjtime, which no library in use wraps")]

use std::io;

fn checked(result: libc::c_int) -> io::Result<()> {
    if result == 0 { Ok(()) } else { Err(io::Error::last_os_error()) }
}

fn number(pid: u32) -> io::Result<libc::pid_t> {
    libc::pid_t::try_from(pid).map_err(|_| io::Error::from(io::ErrorKind::InvalidInput))
}

/// The signals that a drill sends.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Signal {
    /// SIGKILL.
    Kill,
    /// SIGSTOP.
    Suspend,
    /// SIGCONT.
    Continue,
    /// SIGTERM.
    Terminate,
}

/// Sends a signal to a child that has not been waited for, so that its number is still its own.
///
/// # Errors
/// When it is not there or not ours.
pub fn signal(child: u32, signal: Signal) -> io::Result<()> {
    let signal = match signal {
        Signal::Kill => libc::SIGKILL,
        Signal::Suspend => libc::SIGSTOP,
        Signal::Continue => libc::SIGCONT,
        Signal::Terminate => libc::SIGTERM,
    };
    // SAFETY: integer arguments only.
    checked(unsafe { libc::kill(number(child)?, signal) })
}

/// The thread of a process that has this name.
#[must_use]
pub fn thread_named(pid: u32, name: &str) -> Option<u32> {
    std::fs::read_dir(format!("/proc/{pid}/task")).ok()?.flatten().find_map(|task| {
        let comm = std::fs::read_to_string(task.path().join("comm")).ok()?;
        (comm.trim_end() == name).then(|| task.file_name().to_str()?.parse().ok()).flatten()
    })
}

/// One thread of a child held still, as if it hung; it goes on when this is dropped. To be dropped on the thread that
/// made it.
#[derive(Debug)]
pub struct Held(libc::pid_t);

impl Held {
    /// Holds the thread, and returns when it stands still.
    ///
    /// # Errors
    /// When tracing is not allowed here, or the thread is gone.
    pub fn hold(thread: u32) -> io::Result<Self> {
        let thread = number(thread)?;
        let none = std::ptr::null_mut::<libc::c_void>();
        // SAFETY: seize and interrupt take no memory of ours.
        unsafe {
            if libc::ptrace(libc::PTRACE_SEIZE, thread, none, none) != 0 {
                return Err(io::Error::last_os_error());
            }
            let held = Self(thread);
            if libc::ptrace(libc::PTRACE_INTERRUPT, thread, none, none) != 0 {
                return Err(io::Error::last_os_error());
            }
            let mut status = 0;
            if libc::waitpid(thread, &raw mut status, libc::__WALL) != thread || !libc::WIFSTOPPED(status) {
                return Err(io::Error::last_os_error());
            }
            Ok(held)
        }
    }
}

impl Drop for Held {
    fn drop(&mut self) {
        let none = std::ptr::null_mut::<libc::c_void>();
        // SAFETY: detach takes no memory of ours; of a thread that is gone meanwhile it fails.
        unsafe { libc::ptrace(libc::PTRACE_DETACH, self.0, none, none) };
    }
}

/// The files of a child may grow to so many bytes only; `None` lifts that again.
///
/// # Errors
/// When the child is gone.
pub fn limit_files(child: u32, bytes: Option<u64>) -> io::Result<()> {
    let limit =
        libc::rlimit { rlim_cur: bytes.unwrap_or(libc::RLIM_INFINITY), rlim_max: libc::RLIM_INFINITY };
    // SAFETY: `limit` is a valid rlimit; the old one is not asked for.
    checked(unsafe {
        libc::prlimit(number(child)?, libc::RLIMIT_FSIZE, &raw const limit, std::ptr::null_mut())
    })
}

/// Steps the wall clock of this machine by whole seconds, either way; the monotonic clock does not notice.
///
/// # Errors
/// Without the right to (CAP_SYS_TIME).
pub fn step_wall_clock(seconds: i32) -> io::Result<()> {
    // SAFETY: an all-zero timex asks for nothing; the two fields make it a step.
    let result = unsafe {
        let mut step: libc::timex = std::mem::zeroed();
        step.modes = libc::ADJ_SETOFFSET;
        step.time.tv_sec = libc::time_t::from(seconds);
        libc::clock_adjtime(libc::CLOCK_REALTIME, &raw mut step)
    };
    if result < 0 { Err(io::Error::last_os_error()) } else { Ok(()) }
}
