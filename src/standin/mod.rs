//! A base that is not there: simulated drivers, wheels and floor behind the line's own format, and a scripted pair of
//! hands in place of a gamepad. Everything but [`serve`] is pure: time comes in as a number, chance from a seed.
//!
//! ```text
//! bytes in ──> noise ──> drivers (wire::driver) ──> dead time ──> wheels ──> floor: pose
//! bytes out <── noise <── late answers <── drivers <── encoders, gyro, supply <──┘
//! ```
//!
//! - [`hands`]: the script of a pair of hands, as [`PadInput`](crate::core::io::PadInput) over time
//! - [`sim`]: the base; [`fault`]: what can be made to go wrong with it
//! - [`serve`]: both in real time, behind pseudo-terminals or given ports; [`trace`]: the true path as a file
//!
//! The base is a kinematic one: the wheels are of first order, the floor is even, and the base moves by the
//! least-squares twist of its wheels. Nothing here tells how heavy it is.

pub mod fault;
pub mod hands;
pub mod serve;
pub mod sim;
pub mod trace;

mod board;
mod chance;
mod floor;
mod noise;
mod port;
#[cfg(test)]
mod testing;
mod wheels;
