//! The system calls that have no safe wrapper in a library, each behind a small safe function. The shell alone uses
//! it; the pure parts never do.

pub mod clock;
pub mod disturb;
pub mod evdev;
pub mod sched;
pub mod serial;
pub mod socket;
pub mod tty;
