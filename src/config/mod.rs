//! TOML to a checked [`Plan`], with the line and the reason for each refusal.

pub mod plan;

pub use plan::*;
