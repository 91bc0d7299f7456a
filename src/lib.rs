//! Gripline: gamepad in, framed wheel speeds out, for bases that move in any direction.
//!
//! A pure core in a thin shell. [`core`] turns a time and a set of inputs into a set of outputs; it has no clock,
//! file, thread, lock or random source, and cannot fail. [`wire`] turns bytes into values and back and knows nothing
//! of ports. The shell ([`daemon`], [`pad`], [`link`], [`record`]) owns every file descriptor and every sleep.
//!
//! Modules may use those below them in this list, never those above: `check`, `review`, `rehearse`, `drill`, `measure`, `page`, `daemon`, `pad` /
//! `link` / `record`, `standin`, `core`, `config`, `shaping`, `base`, `wire`, `units`; `sys` holds the system calls that have
//! no safe wrapper and may be used by the shell alone.

pub mod base;
pub mod check;
pub mod config;
pub mod core;
pub mod daemon;
pub mod drill;
pub mod link;
pub mod measure;
pub mod pad;
pub mod page;
pub mod record;
pub mod rehearse;
pub mod review;
pub mod shaping;
pub mod standin;
pub mod sys;
pub mod units;
pub mod wire;
