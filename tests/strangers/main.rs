//! Bytes from strangers: the corpus, and seeded mutations of it. The coverage-guided fuzzer (`tests/fuzz/run`) finds
//! new ones; what it found is kept in the corpus.

#![expect(clippy::unwrap_used, clippy::indexing_slicing, reason = "tests: a surprise is a failure")]

mod targets;

use std::path::{Path, PathBuf};

use targets::{TARGETS, Target};

/// So many mutations a target; the fuzzer is for more.
const MUTATIONS: [(&str, u32); 5] = [
    ("decoder", 200_000),
    ("configuration", 6_000),
    ("console", 200_000),
    ("hands", 60_000),
    ("run-file", 6_000),
];

fn corpus(name: &str) -> Vec<(PathBuf, Vec<u8>)> {
    let dir = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/strangers/corpus").join(name);
    let mut files: Vec<PathBuf> = std::fs::read_dir(dir).unwrap().map(|it| it.unwrap().path()).collect();
    files.sort();
    files.into_iter().map(|path| (path.clone(), std::fs::read(path).unwrap())).collect()
}

/// Weyl sequence and mixer of SplitMix64 (Steele, Lea & Flood 2014; constants from memory).
struct Chance(u64);

impl Chance {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    fn below(&mut self, n: usize) -> usize {
        usize::try_from(self.next() % u64::try_from(n.max(1)).unwrap()).unwrap()
    }
}

/// Some bytes changed, dropped, doubled, or taken from another file; numbers driven to their ends.
fn mutate(data: &mut Vec<u8>, other: &[u8], chance: &mut Chance) {
    for _ in 0..=chance.below(4) {
        let at = chance.below(data.len());
        let length = chance.below(32).min(data.len() - at.min(data.len()));
        match chance.below(8) {
            0 if !data.is_empty() => data[at] ^= 1 << chance.below(8),
            1 if !data.is_empty() => data[at] = u8::try_from(chance.below(256)).unwrap(),
            2 => drop(data.drain(at..at + length)),
            3 => {
                let piece = data[at..at + length].to_vec();
                data.splice(at..at, piece);
            }
            4 if !other.is_empty() => {
                let from = chance.below(other.len());
                let piece = &other[from..(from + length).min(other.len())];
                data.splice(at..at, piece.iter().copied());
            }
            5 => data.truncate(at),
            6 => {
                let words: [&[u8]; 8] =
                    [b"0", b"-1", b"1e308", b"nan", b"\xff\xff\xff\xff", b"\x00\x00", b"[[", b"\""];
                data.splice(at..at, words[chance.below(8)].iter().copied());
            }
            _ => data.push(u8::try_from(chance.below(256)).unwrap()),
        }
    }
}

fn hold(name: &str, target: Target) {
    let corpus = corpus(name);
    assert!(!corpus.is_empty(), "{name} has no corpus");
    for (_, data) in &corpus {
        target(data);
    }
    let count = MUTATIONS.iter().find(|it| it.0 == name).unwrap().1;
    for seed in 0..count {
        let mut chance = Chance(u64::from(seed));
        let mut data = corpus[chance.below(corpus.len())].1.clone();
        let other = corpus[chance.below(corpus.len())].1.clone();
        mutate(&mut data, &other, &mut chance);
        let held = std::panic::catch_unwind(|| target(&data));
        assert!(held.is_ok(), "{name}: mutation {seed} of the corpus is not borne");
    }
}

#[test]
fn the_decoder_bears_any_bytes() {
    hold(TARGETS[0].0, TARGETS[0].1);
}

#[test]
fn the_configuration_bears_any_text() {
    hold(TARGETS[1].0, TARGETS[1].1);
}

#[test]
fn the_console_bears_any_client() {
    hold(TARGETS[2].0, TARGETS[2].1);
}

#[test]
fn the_hands_bear_any_script() {
    hold(TARGETS[3].0, TARGETS[3].1);
}

#[test]
fn the_reader_bears_any_run_file() {
    hold(TARGETS[4].0, TARGETS[4].1);
}
