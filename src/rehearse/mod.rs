//! The whole drive on a simulated base: the stand-in, the real drive and a scripted pair of hands, each the program
//! itself in a process of its own, over pseudo-terminals. At the end what happened is held against what should have.

mod path;
mod report;
mod run;
mod script;

pub use report::{Report, Row};
pub use run::{RehearseError, Wanted, rehearse};
pub use script::USUAL_S;
