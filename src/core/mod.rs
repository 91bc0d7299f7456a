//! One pure step a tick: phases, guards, operator intent, what is sent. Does no I/O, reads no clock, allocates
//! nothing, locks nothing, cannot fail.

pub mod budget;
pub mod cause;
pub mod event;
mod guards;
mod gyro;
mod hold;
pub mod io;
mod link;
mod motion;
mod operator;
pub mod phase;
mod reset;
mod send;
mod sent;
pub mod settings;
pub mod state;
mod step;
mod wheels;
pub mod words;

pub use cause::Cause;
pub use event::Event;
pub use io::{Inputs, Outputs, Phase};
pub use state::CoreState;
pub use step::Core;

pub use crate::config::MAX_LINKS;
