//! Faults on purpose: each provoked in travel, measured from what was recorded, and held against the stop budget. On the
//! stand-in all by itself; on a real base together with the people who stand beside it. The drive is the program itself
//! in a process of its own, so that it can be killed, suspended and starved.

mod act;
mod fault;
mod follow;
mod listen;
mod one;
mod page;
mod real;
mod report;
mod script;
mod seen;
mod setup;

pub use act::Flood;
pub use fault::{FAULTS, Fault, Must, Real};
pub use one::on_standin;
pub use page::page;
pub use real::{Answer, OnBase, People, on_base};
pub use report::{Report, Row};
pub use seen::Moment;
pub use setup::{DrillError, Setup};
