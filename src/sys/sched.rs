//! Priority, core, memory: what makes a tick come on time. Each may be refused; the caller then says so and goes on.

#![expect(unsafe_code, reason = "scheduling and memory calls that no library in use wraps")]

use std::io;

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
/// Without the right to.
pub fn lock_memory() -> io::Result<()> {
    // SAFETY: no memory is passed.
    checked(unsafe { libc::mlockall(libc::MCL_CURRENT | libc::MCL_FUTURE | libc::MCL_ONFAULT) })
}

/// Under ordinary scheduling, sleeps end as exactly as they can.
pub fn no_timer_slack() {
    // SAFETY: integer arguments only.
    let _ = unsafe { libc::prctl(libc::PR_SET_TIMERSLACK, 1) };
}

/// Touches the stack that the calling thread will need, so that no page fault comes later.
pub fn touch_stack() {
    let touched = [1_u8; 96 * 1024];
    std::hint::black_box(&touched);
}

/// Ends a process at once.
///
/// # Errors
/// When it is not there or not ours to end.
pub fn kill(pid: u32) -> io::Result<()> {
    let pid = libc::pid_t::try_from(pid).map_err(|_| io::Error::from(io::ErrorKind::InvalidInput))?;
    // SAFETY: integer arguments only.
    checked(unsafe { libc::kill(pid, libc::SIGKILL) })
}
