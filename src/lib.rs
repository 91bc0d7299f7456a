//! Gripline: gamepad in, framed wheel speeds out, for bases that move in any direction.
//!
//! A pure core in a thin shell. [`core`] turns a time and a set of inputs into a set of outputs; it has no clock,
//! file, thread, lock or random source, and cannot fail. [`wire`] turns bytes into values and back and knows nothing
//! of ports. The shell ([`daemon`], [`pad`], [`link`], [`record`]) owns every file descriptor and every sleep.
//!
//! Modules may use those below them in this list, never those above: `check`, `review`, `rehearse`, `drill`, `measure`, `page`, `daemon`, `pad` /
//! `link` / `record`, `standin`, `core`, `config`, `shaping`, `base`, `wire`, `units`; `sys` holds the system calls that have
//! no safe wrapper and may be used by the shell alone.

#![cfg_attr(not(feature = "std"), no_std)]

#[cfg(feature = "std")]
pub mod base;
#[cfg(feature = "std")]
pub mod check;
#[cfg(feature = "std")]
pub mod config;
#[cfg(feature = "std")]
pub mod core;
#[cfg(feature = "std")]
pub mod daemon;
#[cfg(feature = "std")]
pub mod drill;
#[cfg(feature = "std")]
pub mod link;
#[cfg(feature = "std")]
pub mod measure;
#[cfg(feature = "std")]
pub mod pad;
#[cfg(feature = "std")]
pub mod page;
#[cfg(feature = "std")]
pub mod record;
#[cfg(feature = "std")]
pub mod rehearse;
#[cfg(feature = "std")]
pub mod review;
#[cfg(feature = "std")]
pub mod shaping;
#[cfg(feature = "std")]
pub mod standin;
#[cfg(feature = "std")]
pub mod sys;
#[cfg(feature = "std")]
pub mod units;
pub mod wire;
