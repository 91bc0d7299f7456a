//! The service manager: told that the drive is ready after the first finished tick, and fed only while ticks come, so
//! that a stuck tick starves the watchdog. On a thread of its own: neither the tick nor the sentinel ever waits for
//! the service manager.

use std::io;
use std::sync::Arc;

use sd_notify::NotifyState;

use super::board::Board;
use super::sentinel::Pulse;
use crate::core::io::Phase;
use crate::sys::clock;
use crate::units::Mono;

/// Without a watchdog, so often the phase is told.
const LOOK_NS: u64 = 500_000_000;
/// Until the first tick has come, so often it is looked for.
const FIRST_MS: u64 = 2;

/// Starts it, where there is a service manager.
///
/// # Errors
/// When there can be no thread.
pub(super) fn start(pulse: Arc<Pulse>, board: Arc<Board>) -> io::Result<()> {
    if std::env::var_os("NOTIFY_SOCKET").is_none() {
        return Ok(());
    }
    let thread = std::thread::Builder::new().name("service".into()).stack_size(128 * 1024);
    thread.spawn(move || tell(&pulse, &board))?;
    Ok(())
}

fn tell(pulse: &Pulse, board: &Board) {
    let every_ns = sd_notify::watchdog_enabled().map_or(LOOK_NS, |it| {
        (u64::try_from(it.as_nanos()).unwrap_or(u64::MAX) / 4).clamp(1_000_000, LOOK_NS)
    });
    while pulse.last().is_none() {
        clock::sleep_ms(FIRST_MS);
    }
    let _ = sd_notify::notify(&[NotifyState::Ready]);
    let mut fed: Option<Mono> = None;
    let mut told: Option<Phase> = None;
    while !pulse.ends() {
        if let Some(last) = pulse.last()
            && fed != Some(last)
        {
            let _ = sd_notify::notify(&[NotifyState::Watchdog]);
            fed = Some(last);
        }
        if let Some(now) = board.read()
            && told != Some(now.phase)
        {
            let _ = sd_notify::notify(&[NotifyState::Status(now.phase.name())]);
            told = Some(now.phase);
        }
        clock::sleep_until(clock::now().plus_ns(every_ns));
    }
    let _ = sd_notify::notify(&[NotifyState::Stopping]);
}
