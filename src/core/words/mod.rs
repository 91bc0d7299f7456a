//! Words for people: each fact as one plain line, with the values that decided it and the names of the plan. Called
//! outside the tick; the one part of the core that allocates.

mod causes;
mod events;
mod waits;

pub use causes::{cause, clears};
pub use events::event;
pub use waits::wait;

use super::io::Phase;
use crate::config::Plan;
use crate::wire::status;

impl Phase {
    /// The phase's name.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Parked => "Parked",
            Self::Ready => "Ready",
            Self::Driving => "Driving",
            Self::Stopping => "Stopping",
            Self::Tripped => "Tripped",
        }
    }
}

fn wheel(plan: &Plan, index: u8) -> String {
    plan.wheels
        .get(usize::from(index))
        .map_or_else(|| format!("wheel {index}"), |it| format!("wheel \"{}\"", it.name))
}

fn greatest_rad_s(plan: &Plan, index: u8) -> f64 {
    plan.wheels.get(usize::from(index)).map_or(0.0, |it| it.max_rad_s)
}

fn link(plan: &Plan, index: u8) -> String {
    plan.links
        .get(usize::from(index))
        .map_or_else(|| format!("link {index}"), |it| format!("link \"{}\"", it.name))
}

fn port(plan: &Plan, index: u8) -> String {
    plan.links.get(usize::from(index)).map_or_else(String::new, |it| it.port.display().to_string())
}

/// Names what of a status tells why a driver stopped.
fn bits(status: u16) -> String {
    let names = [
        (status::OVER_CURRENT, "over-current"),
        (status::OVER_TEMPERATURE, "over-temperature"),
        (status::UNDER_VOLTAGE, "under-voltage"),
        (status::ENCODER, "encoder"),
        (status::WENT_SILENT, "it heard nothing in time"),
        (status::STOP_INPUT_OPEN, "stop input open"),
    ];
    let set: Vec<&str> = names.iter().filter(|(bit, _)| status & bit != 0).map(|(_, name)| *name).collect();
    if set.is_empty() { format!("status 0x{status:04x}") } else { set.join(", ") }
}
