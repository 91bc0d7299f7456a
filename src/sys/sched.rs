//! Priority, core, memory: what makes a tick come on time. Each may be refused; the caller then says so and goes on.

#![expect(unsafe_code, reason = "scheduling and memory calls that no library in use wraps")]

use std::io;
use std::os::fd::{AsRawFd, FromRawFd, OwnedFd};

fn checked(result: libc::c_int) -> io::Result<()> {
    if result == 0 { Ok(()) } else { Err(io::Error::last_os_error()) }
}

/// The calling thread gets SCHED_FIFO at this priority (1 to 99).
///
/// # Errors
/// Without the right to.
pub fn set_realtime(priority: u8) -> io::Result<()> {
    let param = libc::sched_param { sched_priority: libc::c_int::from(priority) };
    // SAFETY: `param` is a valid sched_param; 0 is the calling thread.
    checked(unsafe { libc::sched_setscheduler(0, libc::SCHED_FIFO, &raw const param) })
}

/// The calling thread and those that it starts run at a real-time priority, until this is dropped. Where that is not
/// allowed, nothing changes.
#[derive(Debug)]
pub struct Lifted(bool);

impl Lifted {
    /// To this priority; 0: not at all.
    #[must_use]
    pub fn to(priority: u8) -> Self {
        Self(priority > 0 && set_realtime(priority).is_ok())
    }
}

impl Drop for Lifted {
    fn drop(&mut self) {
        if self.0 {
            let param = libc::sched_param { sched_priority: 0 };
            // SAFETY: `param` is a valid sched_param; 0 is the calling thread.
            let _ = unsafe { libc::sched_setscheduler(0, libc::SCHED_OTHER, &raw const param) };
        }
    }
}

/// The calling thread runs on this core only.
///
/// # Errors
/// When there is no such core.
pub fn pin_to(cpu: usize) -> io::Result<()> {
    if cpu >= usize::try_from(libc::CPU_SETSIZE).unwrap_or(1024) {
        return Err(io::Error::from(io::ErrorKind::InvalidInput));
    }
    // SAFETY: an all-zero set is the empty one; `cpu` is within it.
    unsafe {
        let mut set: libc::cpu_set_t = std::mem::zeroed();
        libc::CPU_SET(cpu, &mut set);
        checked(libc::sched_setaffinity(0, size_of::<libc::cpu_set_t>(), &raw const set))
    }
}

/// Pages stay in memory once they have been touched, now and later.
///
/// # Errors
/// Without the right to lock without limit. A limit, however large, would count every reserved page: then later threads
/// and allocations would fail, which is worse than memory that is not locked.
pub fn lock_memory() -> io::Result<()> {
    let mut limit = libc::rlimit { rlim_cur: 0, rlim_max: 0 };
    // SAFETY: `limit` is a valid rlimit for the call to fill.
    checked(unsafe { libc::getrlimit(libc::RLIMIT_MEMLOCK, &raw mut limit) })?;
    if limit.rlim_cur != libc::RLIM_INFINITY && !has_ipc_lock() {
        return Err(io::Error::other(format!("limited to {} KiB", limit.rlim_cur / 1024)));
    }
    // SAFETY: no memory is passed.
    checked(unsafe { libc::mlockall(libc::MCL_CURRENT | libc::MCL_FUTURE | libc::MCL_ONFAULT) })
}

/// CAP_IPC_LOCK, number 14 of capabilities(7), lifts the limit.
fn has_ipc_lock() -> bool {
    let status = std::fs::read_to_string("/proc/self/status").unwrap_or_default();
    let set = status.lines().find_map(|it| it.strip_prefix("CapEff:"));
    set.and_then(|it| u64::from_str_radix(it.trim(), 16).ok()).is_some_and(|it| it & (1 << 14) != 0)
}

/// Under ordinary scheduling, sleeps end as exactly as they can.
pub fn no_timer_slack() {
    // SAFETY: integer arguments only.
    let _ = unsafe { libc::prctl(libc::PR_SET_TIMERSLACK, 1) };
}

/// A file that may not grow any more (a limit of the shell or of the service) is an error of the write, not the end of
/// the program.
pub fn survive_file_limits() {
    // SAFETY: ignoring a signal runs no code of ours.
    let _ = unsafe { libc::signal(libc::SIGXFSZ, libc::SIG_IGN) };
}

/// Touches the stack that the calling thread will need, so that no page fault comes later.
pub fn touch_stack() {
    let touched = [1_u8; 96 * 1024];
    std::hint::black_box(&touched);
}

/// Ends a process at once, if `is_meant` says so of it. It is held by a handle from before the question until after the
/// signal, so that another process that gets its number meanwhile is never hit. False: it was not meant.
///
/// # Errors
/// When it is not there or not ours to end.
pub fn kill(pid: u32, is_meant: impl FnOnce(u32) -> bool) -> io::Result<bool> {
    let number = libc::pid_t::try_from(pid).map_err(|_| io::Error::from(io::ErrorKind::InvalidInput))?;
    // SAFETY: integer arguments only; the descriptor returned is ours.
    let handle = unsafe {
        let fd = libc::syscall(libc::SYS_pidfd_open, number, 0);
        let fd = libc::c_int::try_from(fd).unwrap_or(-1);
        checked(fd.min(0))?;
        OwnedFd::from_raw_fd(fd)
    };
    if !is_meant(pid) {
        return Ok(false);
    }
    let none = std::ptr::null::<libc::siginfo_t>();
    // SAFETY: the handle is open; no siginfo is passed.
    let sent =
        unsafe { libc::syscall(libc::SYS_pidfd_send_signal, handle.as_raw_fd(), libc::SIGKILL, none, 0) };
    if sent == 0 { Ok(true) } else { Err(io::Error::last_os_error()) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_the_process_that_is_meant_is_ended() {
        let mut child = std::process::Command::new("sleep").arg("60").spawn().unwrap();
        assert!(!kill(child.id(), |_| false).unwrap());
        assert!(child.try_wait().unwrap().is_none(), "ended although it was not meant");
        assert!(kill(child.id(), |pid| pid == child.id()).unwrap());
        let status = child.wait().unwrap();
        assert_eq!(std::os::unix::process::ExitStatusExt::signal(&status), Some(libc::SIGKILL));
        assert!(kill(child.id(), |_| true).is_err(), "it is gone");
    }
}
