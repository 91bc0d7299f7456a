//! The sentinel watches the tick from outside and pulls the stop line when it dies. It runs one priority above the tick
//! and is not pinned to its core. It waits for nobody but the clock.

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};

use crate::config::Plan;
use crate::core::io::Puller;
use crate::link::StopLine;
use crate::sys::{clock, sched};
use crate::units::{Mono, s_to_ns};

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

    /// The end of the last tick; `None` before the first.
    pub(super) fn last(&self) -> Option<Mono> {
        Some(self.last_ns.load(Ordering::Acquire)).filter(|it| *it > 0).map(Mono::from_ns)
    }

    /// No more ticks are to come.
    pub(super) fn end(&self) {
        self.ending.store(true, Ordering::Release);
    }

    pub(super) fn ends(&self) -> bool {
        self.ending.load(Ordering::Acquire)
    }
}

/// Starts the sentinel.
///
/// # Errors
/// When there can be no thread.
pub(super) fn start(
    pulse: Arc<Pulse>,
    stop: StopLine,
    plan: &Plan,
) -> std::io::Result<std::thread::JoinHandle<()>> {
    let late_ns = s_to_ns(plan.guard.late_ms * 1e-3);
    let period_ns = plan.tick.period_ns();
    let priority = plan.tick.realtime;
    std::thread::Builder::new().name("sentinel".into()).stack_size(128 * 1024).spawn(move || {
        if priority > 0 {
            // Without the right to, the tick says so.
            let _ = sched::set_realtime(priority.saturating_add(1).min(99));
        }
        sched::no_timer_slack();
        watch(&pulse, &stop, late_ns, period_ns);
    })
}

/// It looks a little after the moment from which on a tick is late.
const AFTER_NS: u64 = 100_000;

fn watch(pulse: &Pulse, stop: &StopLine, late_ns: u64, period_ns: u64) {
    let mut pulled = false;
    while !pulse.ends() {
        let now = clock::now();
        // Before the first tick nothing can have been sent that moves.
        let late = pulse.last().is_some_and(|last| now.since_ns(last) > late_ns);
        if late && pulled {
            stop.repeat();
        } else if late {
            stop.pull(Puller::Sentinel);
        }
        pulled = late;
        let next = match pulse.last() {
            Some(last) if !late => last.plus_ns(late_ns + AFTER_NS),
            Some(_) | None => now.plus_ns(period_ns),
        };
        clock::sleep_until(next);
    }
}
