//! One pure step a tick: phases, guards, operator intent, what is sent. Does no I/O, reads no clock, allocates
//! nothing, locks nothing, cannot fail.

pub mod budget;
pub mod cause;
pub mod event;
mod guards;
mod hold;
pub mod io;
mod link;
pub mod phase;
pub mod settings;
mod step;
mod wheels;
pub mod words;

pub use cause::Cause;
pub use event::Event;
pub use io::{Inputs, Outputs, Phase};
pub use step::{Core, CoreState};

/// The most links one base may have.
pub const MAX_LINKS: usize = 8;
