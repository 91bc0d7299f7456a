//! The targets under libFuzzer; which one, the environment says (`TARGET`).
#![no_main]

#[path = "../../strangers/targets.rs"]
mod targets;

use std::sync::LazyLock;

static TARGET: LazyLock<targets::Target> = LazyLock::new(|| {
    let name = std::env::var("TARGET").unwrap_or_default();
    let found = targets::TARGETS.iter().find(|it| it.0 == name);
    found.expect("TARGET names one of the folders of tests/strangers/corpus").1
});

libfuzzer_sys::fuzz_target!(|data: &[u8]| TARGET(data));
