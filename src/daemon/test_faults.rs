//! Breaks the tick on purpose, for the tests of sentinel, panic hook and watchdog. Only in builds with the feature
//! `test-faults`: `GRIPLINE_TEST_FAULT=spin:3.0` (or `sleep`, `panic`) strikes three seconds after the start.

use crate::sys::clock;
use crate::units::Mono;

/// Strikes when its time has come.
pub(super) fn strike(origin: Mono, now: Mono) {
    let Ok(fault) = std::env::var("GRIPLINE_TEST_FAULT") else { return };
    let Some((what, seconds)) = fault.split_once(':') else { return };
    if now.since_s(origin) < seconds.parse().unwrap_or(f64::INFINITY) {
        return;
    }
    match what {
        "spin" => loop {
            std::hint::spin_loop();
        },
        "sleep" => clock::sleep_until(Mono::from_ns(u64::MAX / 4)),
        _ => fail(),
    }
}

#[expect(clippy::panic, reason = "this is what the tests of the panic hook ask for")]
fn fail() {
    panic!("asked to fail by a test");
}
