//! What ends a drive from outside the tick: signals and panics.

use std::io::Write;
use std::sync::Arc;
use std::sync::atomic::Ordering;

use super::gather::Asked;
use crate::core::io::Puller;
use crate::link::StopLine;
use crate::sys::clock;
use crate::units::Mono;

/// After a panic the stop is written so often, this far apart, before the program ends.
const REPEATS: u32 = 20;
const REPEAT_MS: u64 = 5;

/// Any thread that panics pulls the stop line first of all; then the program ends, for the service manager to see.
pub(super) fn panic_pulls(stop: StopLine) {
    let usual = std::panic::take_hook();
    std::panic::set_hook(Box::new(move |info| {
        stop.pull(Puller::Panic);
        for _ in 0..REPEATS {
            clock::sleep_ms(REPEAT_MS);
            stop.repeat();
        }
        // Words come last: a terminal may keep this thread waiting for ever.
        usual(info);
        warn("a part of the program failed; the stop line was pulled; please report it with the run file");
        std::process::exit(1);
    }));
}

/// One request to end often comes as several signals at once (a closing terminal, `timeout`): those count as one.
const ONE_REQUEST_NS: u64 = 200_000_000;

/// The first signal asks for an orderly end, a second one pulls the stop line.
pub(super) fn signals_ask(asked: Arc<Asked>, stop: StopLine) {
    let mut first: Option<Mono> = None;
    let handler = move || {
        asked.quit.store(true, Ordering::Relaxed);
        let now = clock::now();
        if now.since_ns(*first.get_or_insert(now)) > ONE_REQUEST_NS {
            asked.hasty.store(true, Ordering::Relaxed);
            stop.pull(Puller::SecondSignal);
        }
    };
    if let Err(error) = ctrlc::set_handler(handler) {
        warn(&format!("signals do not ask for an orderly end: {error}; end it by `gripline stop`"));
    }
}

/// One line on stderr. Nobody may be listening: that is no reason to fail.
pub(super) fn warn(what: &str) {
    let _ = writeln!(std::io::stderr(), "gripline: {what}");
}
