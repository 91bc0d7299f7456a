//! What a recorded run shows: tables for others to work with, and a summary in words.

mod csv;
mod summary;

pub use csv::{CsvError, write_csv};
pub use summary::{Stop, Summary, summary};
