//! The core as a whole, in simulated time.

#![expect(clippy::unwrap_used, clippy::panic, reason = "tests: a surprise is a failure")]

mod drive;
mod guards;
mod inherited;
mod layouts;
mod links;
mod phases;
mod replay;
mod total;
mod words;
mod world;
