//! One gamepad: found by name or id, mapped by the configuration, believed only while its device answers.
//!
//! gilrs finds pads, knows their layouts and tells changes; but it misses unplugs, keeps old values after one, and
//! reports nothing at start. So the pad's own device file is watched beside it, and the true state of sticks and
//! buttons is read there whenever a pad is taken.

mod choose;
mod hand_over;
mod state;
mod thread;

pub use choose::{PadFound, list};
pub use hand_over::PadFeed;
pub use thread::{PadError, start};
