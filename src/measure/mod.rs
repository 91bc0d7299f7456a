//! What the tools round the drive share, since they do not know each other: the program's parts as processes, and what
//! a run file tells in figures.

pub mod child;
mod summary;
pub mod truth;

pub use summary::{Stop, Summary, summary};
