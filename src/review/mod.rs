//! What a recorded run shows: tables for others to work with.

mod csv;

pub use csv::{CsvError, write_csv};
