//! TOML to a checked [`Plan`], with the line and the reason for each refusal.

mod checks;
pub mod keys;
mod mistake;
mod parse;
pub mod plan;
mod reader;
mod reference;

pub use mistake::Mistake;
pub use parse::{ConfigError, load, parse, small_text, wheels};
pub use plan::*;

/// The configuration that `rehearse` uses unless another is given.
pub const EXAMPLE: &str = include_str!("../../config/four-mecanum.toml");
