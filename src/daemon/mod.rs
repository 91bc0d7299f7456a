//! The running drive: threads, the tick's clock, the sentinel, the console, the service manager. Knows no mathematics:
//! it carries bytes and time between the world and the core.

mod alarms;
mod answers;
mod board;
mod console;
mod gather;
mod printer;
pub mod request;
mod run;
mod sentinel;
mod service;
mod socket;
#[cfg(feature = "test-faults")]
mod test_faults;
mod tick;
mod ticker;

pub use run::{DriveError, DriveOptions, Ended, drive};
pub use socket::{ConsoleError, ask, connect, connect_any};

use alarms::warn;

/// What is said at the start of everything that moves a base.
pub const CAUTION: &str = "Gripline is not a safety device. Keep a hard-wired emergency stop within reach, try changes with the wheels \
off the floor\nfirst, keep people out of the bay; local rules and a competent person decide whether this base may move.";
