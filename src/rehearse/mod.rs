//! The whole drive on a simulated base.
pub mod script;
