//! A base that is not there: simulated drivers, wheels and floor behind the line's own format, and a scripted pair of
//! hands in place of a gamepad. Everything but [`serve`] is pure: time comes in as a number, chance from a seed.
//!
//! ```text
//! bytes in ──> noise ──> drivers (wire::driver) ──> dead time ──> wheels ──> floor: pose
//! bytes out <── noise <── late answers <── drivers <── encoders, gyro, supply <──┘
//! ```
//!
//! - [`hands`]: the script of a pair of hands, as [`PadInput`](crate::core::io::PadInput) over time

pub mod hands;

mod chance;
mod noise;
mod wheels;
