//! One pure step a tick: phases, guards, operator intent, what is sent. Does no I/O, reads no clock, allocates
//! nothing, locks nothing, cannot fail.

pub mod cause;
pub mod event;
pub mod io;

pub use cause::Cause;
pub use event::Event;
pub use io::{Inputs, Outputs, Phase};

/// The most links one base may have.
pub const MAX_LINKS: usize = 8;
