//! Drives by the thousand in simulated time: core, the line's bytes both ways, and the stand-in, without threads and
//! without waiting. Random bases, hands and faults, one to three of them at random moments; whatever breaks, the base
//! stands within its budget and does not move again before a person allows it.
//!
//! `GRIPLINE_DRIVES` sets how many drives, `GRIPLINE_SEED` the one to run again by itself.

#![expect(clippy::unwrap_used, clippy::panic, reason = "tests: a surprise is a failure")]

mod bases;
mod chance;
mod drive;
mod faults;
mod hands;
mod host;
mod laws;
mod permission;
mod port;
mod standing;
mod tally;
mod wheels;

use std::panic::{AssertUnwindSafe, catch_unwind};
use std::process::ExitCode;
use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};

use drive::Report;
use gripline::sys::clock;
use tally::Tally;

/// What must hold; the words tell what does not.
macro_rules! law {
    ($holds:expr, $($words:tt)+) => {
        // What cannot be compared does not hold.
        let holds: bool = $holds;
        if !holds {
            return Err(format!($($words)+));
        }
    };
}
pub(crate) use law;

/// So many drives are made with each base: making one costs as much as a short drive.
const DRIVES_A_BASE: u64 = 8;
/// Enough where code is not optimised; what CI runs is built for release.
const DRIVES: u64 = if cfg!(debug_assertions) { 400 } else { 100_000 };

fn main() -> ExitCode {
    let number = |name| std::env::var(name).ok().map(|it| it.parse::<u64>().unwrap());
    let args: Vec<String> = std::env::args().skip(1).filter(|it| !it.starts_with("--")).collect();
    let wanted = |name: &str| args.is_empty() || args.iter().any(|it| name.contains(it.as_str()));
    if std::env::args().any(|it| it == "--list") {
        tally::TESTS.iter().for_each(|name| println!("{name}: test"));
        return ExitCode::SUCCESS;
    }
    if !tally::TESTS.iter().any(|it| wanted(it)) {
        println!(
            "\nrunning 0 tests\n\ntest result: ok. 0 passed; 0 failed; 0 ignored; 0 measured; {} filtered out; finished in 0.00s\n",
            tally::TESTS.len()
        );
        return ExitCode::SUCCESS;
    }
    // A panic is a failure of its drive, told with the seed.
    std::panic::set_hook(Box::new(|_| {}));
    if let Some(seed) = number("GRIPLINE_SEED") {
        return match one(seed, &bases::random(seed / DRIVES_A_BASE), true) {
            Ok(report) => {
                println!("seed {seed}: nothing wrong\n{report:#?}");
                ExitCode::SUCCESS
            }
            Err(wrong) => {
                println!("seed {seed}: {wrong}\n{}", bases::random(seed / DRIVES_A_BASE).plan.text);
                ExitCode::FAILURE
            }
        };
    }
    let drives = number("GRIPLINE_DRIVES").unwrap_or(DRIVES);
    let began = clock::now();
    let tally = many(drives);
    tally.print(clock::now().since_s(began))
}

/// One drive; a panic in it is one more way to go wrong.
fn one(seed: u64, base: &bases::Base, tells: bool) -> Result<Report, String> {
    catch_unwind(AssertUnwindSafe(|| drive::run(seed, base, tells))).unwrap_or_else(|panic| {
        let words = panic.downcast_ref::<String>().cloned();
        let words = words.or_else(|| panic.downcast_ref::<&str>().map(|it| (*it).to_owned()));
        Err(format!("panic: {}", words.unwrap_or_default()))
    })
}

/// As many drives as wanted, on all cores.
fn many(drives: u64) -> Tally {
    let next = AtomicU64::new(0);
    let enough = AtomicBool::new(false);
    let threads = std::thread::available_parallelism().map_or(1, usize::from);
    let worker = || {
        let mut tally = Tally::default();
        while !enough.load(Ordering::Relaxed) {
            let base_seed = next.fetch_add(1, Ordering::Relaxed);
            let seeds = base_seed * DRIVES_A_BASE..((base_seed + 1) * DRIVES_A_BASE).min(drives);
            if seeds.is_empty() {
                break;
            }
            let base = match catch_unwind(|| bases::random(base_seed)) {
                Ok(base) => base,
                Err(_) => {
                    tally.wrong(seeds.start, "the base cannot be made".to_owned());
                    continue;
                }
            };
            for seed in seeds {
                let report = one(seed, &base, false);
                if seed % 1000 == 0 {
                    tally.repeats(seed, &report, &one(seed, &base, false));
                }
                match report {
                    Ok(report) => tally.add(&report),
                    Err(wrong) => tally.wrong(seed, wrong),
                }
            }
            if tally.much_is_wrong() {
                enough.store(true, Ordering::Relaxed);
            }
        }
        tally
    };
    std::thread::scope(|scope| {
        let all: Vec<_> = (0..threads).map(|_| scope.spawn(worker)).collect();
        let mut sum = Tally::default();
        for it in all {
            sum.join(it.join().unwrap());
        }
        sum
    })
}
