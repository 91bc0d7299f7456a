//! The sentinel watches the tick from outside and pulls the stop line when it dies. It runs one priority above the tick
//! and is not pinned to its core. It also feeds the service manager's watchdog, as long as ticks come.

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};

use crate::core::io::Puller;
use crate::link::StopLine;
use crate::sys::{clock, sched};
use crate::units::Mono;

/// When the tick last finished, and whether the program is ending.
#[derive(Debug, Default)]
pub(super) struct Pulse {
    last_ns: AtomicU64,
    ending: AtomicBool,
}

impl Pulse {
    /// The tick finishes.
    pub(super) fn beat(&self, now: Mono) {
        self.last_ns.store(now.ns(), Ordering::Release);
    }

    fn last(&self) -> Option<Mono> {
        Some(self.last_ns.load(Ordering::Acquire)).filter(|it| *it > 0).map(Mono::from_ns)
    }

    /// No more ticks are to come.
    pub(super) fn end(&self) {
        self.ending.store(true, Ordering::Release);
    }

    fn ends(&self) -> bool {
        self.ending.load(Ordering::Acquire)
    }
}

/// Starts the sentinel.
pub(super) fn start(
    pulse: Arc<Pulse>,
    stop: StopLine,
    late_ns: u64,
    period_ns: u64,
    priority: u8,
) -> std::io::Result<std::thread::JoinHandle<()>> {
    std::thread::Builder::new().name("sentinel".into()).stack_size(128 * 1024).spawn(move || {
        if priority > 0 {
            // Without the right to, the tick has already said so.
            let _ = sched::set_realtime(priority.saturating_add(1).min(99));
        }
        sched::no_timer_slack();
        watch(&pulse, &stop, late_ns, period_ns);
    })
}

fn watch(pulse: &Pulse, stop: &StopLine, late_ns: u64, period_ns: u64) {
    let watchdog_ns =
        sd_notify::watchdog_enabled().map(|it| u64::try_from(it.as_nanos()).unwrap_or(u64::MAX) / 4);
    let (mut fed, mut fed_at) = (Mono::default(), clock::now());
    let mut pulled = false;
    loop {
        if pulse.ends() {
            return;
        }
        let now = clock::now();
        let Some(last) = pulse.last() else {
            // The first tick has not come: nothing can have been sent that moves.
            clock::sleep_until(now.plus_ns(period_ns));
            continue;
        };
        if now.since_ns(last) > late_ns {
            if pulled {
                stop.repeat();
            } else {
                stop.pull(Puller::Sentinel);
                pulled = true;
            }
            clock::sleep_until(now.plus_ns(period_ns));
            continue;
        }
        pulled = false;
        if let Some(every) = watchdog_ns
            && now.since_ns(fed_at) >= every
            && last != fed
        {
            let _ = sd_notify::notify(&[sd_notify::NotifyState::Watchdog]);
            (fed, fed_at) = (last, now);
        }
        // Looks just after the tick would be too late, and often enough for the watchdog.
        clock::sleep_until(
            last.plus_ns(late_ns + 100_000).min(now.plus_ns(watchdog_ns.unwrap_or(u64::MAX) / 2)),
        );
    }
}
