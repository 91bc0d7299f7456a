//! The one place that reads a clock or sleeps. `CLOCK_MONOTONIC` for everything that decides; the wall clock only
//! names files.

#![expect(
    unsafe_code,
    reason = "clock_gettime and clock_nanosleep; no safe wrapper sleeps to an absolute deadline"
)]

use crate::units::Mono;

/// Now, on `CLOCK_MONOTONIC`.
#[must_use]
pub fn now() -> Mono {
    let mut t = libc::timespec { tv_sec: 0, tv_nsec: 0 };
    // SAFETY: `t` is a valid timespec for the call to fill; CLOCK_MONOTONIC always exists on Linux.
    unsafe { libc::clock_gettime(libc::CLOCK_MONOTONIC, &raw mut t) };
    Mono::from_ns(t.tv_sec.unsigned_abs() * 1_000_000_000 + t.tv_nsec.unsigned_abs())
}

/// Wall clock, nanoseconds since 1970 (UTC). It may step: never decide anything by it.
#[must_use]
pub fn wall_ns() -> u64 {
    let mut t = libc::timespec { tv_sec: 0, tv_nsec: 0 };
    // SAFETY: as in `now`.
    unsafe { libc::clock_gettime(libc::CLOCK_REALTIME, &raw mut t) };
    t.tv_sec.unsigned_abs() * 1_000_000_000 + t.tv_nsec.unsigned_abs()
}

/// Sleeps until `deadline`; a signal does not cut it short. Returns at once when it has passed.
pub fn sleep_until(deadline: Mono) {
    let ns = deadline.ns();
    let t = libc::timespec {
        tv_sec: libc::time_t::try_from(ns / 1_000_000_000).unwrap_or(libc::time_t::MAX),
        tv_nsec: libc::c_long::try_from(ns % 1_000_000_000).unwrap_or(0),
    };
    // SAFETY: `t` is a valid timespec, no remainder is asked for.
    while unsafe {
        libc::clock_nanosleep(libc::CLOCK_MONOTONIC, libc::TIMER_ABSTIME, &raw const t, std::ptr::null_mut())
    } == libc::EINTR
    {}
}

/// Sleeps for a span, measured on the monotonic clock.
pub fn sleep_ms(span_ms: u64) {
    sleep_until(now().plus_ns(span_ms.saturating_mul(1_000_000)));
}
