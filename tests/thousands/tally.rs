//! What all drives together came to, printed as a test runner would.

use std::collections::BTreeMap;
use std::process::ExitCode;

use crate::drive::Report;
use crate::faults::Kind;

/// What the drives together must show.
pub(crate) const TESTS: [&str; 4] = [
    "whatever_breaks_the_base_stands_within_its_budget_until_it_is_allowed_to_move",
    "the_same_seed_is_the_same_drive",
    "every_fault_meets_bases_in_motion",
    "hands_that_leave_nothing_out_drive_again",
];

/// So many failures tell enough.
const ENOUGH: usize = 12;
/// Below so many drives nothing is said about what chance should have brought.
const FEW: u64 = 900;

#[derive(Default)]
pub(crate) struct Tally {
    drives: u64,
    ticks: u64,
    moved: u64,
    moved_again: u64,
    left_out_nothing: u64,
    /// A kind of fault: how often, and in motion.
    faults: BTreeMap<usize, (u64, u64)>,
    trips: BTreeMap<&'static str, u64>,
    several: u64,
    wrong: Vec<(u64, String)>,
    differs: Vec<u64>,
    repeated: u64,
}

impl Tally {
    pub(crate) fn add(&mut self, report: &Report) {
        self.drives += 1;
        self.ticks += u64::from(report.ticks);
        self.moved += u64::from(report.moved);
        self.moved_again += u64::from(report.moved_again);
        self.left_out_nothing += u64::from(report.nothing_left_out);
        self.several += u64::from(report.faults.len() > 1);
        for (kind, in_motion) in &report.faults {
            let (met, moving) = self.faults.entry(*kind).or_default();
            *met += 1;
            *moving += u64::from(*in_motion);
        }
        for code in &report.trips {
            *self.trips.entry(code).or_default() += 1;
        }
    }

    pub(crate) fn wrong(&mut self, seed: u64, words: String) {
        self.drives += 1;
        self.wrong.push((seed, words));
    }

    pub(crate) fn repeats(
        &mut self,
        seed: u64,
        once: &Result<Report, String>,
        again: &Result<Report, String>,
    ) {
        self.repeated += 1;
        if once != again {
            self.differs.push(seed);
        }
    }

    pub(crate) fn much_is_wrong(&self) -> bool {
        self.wrong.len() >= ENOUGH
    }

    pub(crate) fn join(&mut self, other: Self) {
        self.drives += other.drives;
        self.ticks += other.ticks;
        self.moved += other.moved;
        self.moved_again += other.moved_again;
        self.left_out_nothing += other.left_out_nothing;
        self.several += other.several;
        self.repeated += other.repeated;
        for (kind, (met, moving)) in other.faults {
            let sum = self.faults.entry(kind).or_default();
            *sum = (sum.0 + met, sum.1 + moving);
        }
        for (code, count) in other.trips {
            *self.trips.entry(code).or_default() += count;
        }
        self.wrong.extend(other.wrong);
        self.differs.extend(other.differs);
    }

    /// Prints all of it; the end is that of an ordinary test runner.
    pub(crate) fn print(mut self, took_s: f64) -> ExitCode {
        self.wrong.sort();
        println!("\nfaults met (of them in motion):");
        for (index, kind) in Kind::ALL.iter().enumerate() {
            let (met, moving) = self.faults.get(&index).copied().unwrap_or_default();
            println!("  {:32} {met:7} ({moving})", kind.name());
        }
        let trips: Vec<String> = self.trips.iter().map(|(code, count)| format!("{code} {count}")).collect();
        println!("trips: {}", trips.join(", "));
        println!(
            "{} drives of {:.1} simulated seconds on average, {} with several faults, {} in which the base moved, {} in \
             which it was driven again; {:.0} drives a second",
            self.drives,
            self.ticks as f64 / 100.0 / self.drives.max(1) as f64,
            self.several,
            self.moved,
            self.moved_again,
            self.drives as f64 / took_s,
        );
        println!("\nrunning {} tests", TESTS.len());
        let results = self.results();
        for (name, result) in TESTS.iter().zip(&results) {
            println!("test {name} ... {}", if result.is_ok() { "ok" } else { "FAILED" });
        }
        for (name, result) in TESTS.iter().zip(&results) {
            if let Err(words) = result {
                println!("\n---- {name} ----\n{words}");
            }
        }
        let failed = results.iter().filter(|it| it.is_err()).count();
        let verdict = if failed == 0 { "ok" } else { "FAILED" };
        println!(
            "\ntest result: {verdict}. {} passed; {failed} failed; 0 ignored; 0 measured; 0 filtered out; finished in {took_s:.2}s\n",
            TESTS.len() - failed
        );
        if failed == 0 { ExitCode::SUCCESS } else { ExitCode::FAILURE }
    }

    fn results(&self) -> [Result<(), String>; 4] {
        let words = |(seed, it): &(u64, String)| {
            format!("seed {seed}: {it}\n  again: GRIPLINE_SEED={seed} cargo test --release --test thousands")
        };
        let wrong: Vec<String> = self.wrong.iter().map(words).collect();
        let enough = self.drives < FEW || !self.wrong.is_empty();
        let unmet = |(index, kind): (usize, &Kind)| {
            let moving = self.faults.get(&index).map_or(0, |it| it.1);
            (moving * 2_000 < self.drives).then(|| format!("{}: {moving}", kind.name()))
        };
        let unmet: Vec<String> = Kind::ALL.iter().enumerate().filter_map(unmet).collect();
        let holds = |it: bool, words: String| if it { Ok(()) } else { Err(words) };
        [
            holds(wrong.is_empty(), wrong.join("\n")),
            holds(self.differs.is_empty(), format!("other bytes for seeds {:?}", self.differs)),
            holds(enough || unmet.is_empty(), format!("too few in motion: {}", unmet.join(", "))),
            holds(
                enough || (self.moved * 10 > self.drives * 8 && self.moved_again * 5 > self.left_out_nothing),
                format!(
                    "{} of {} drives moved; {} moved again, {} left nothing out",
                    self.moved, self.drives, self.moved_again, self.left_out_nothing
                ),
            ),
        ]
    }
}
