//! What the drivers tell when the drive is dead: their feedback comes by itself, and whoever opens the port hears it.

use std::os::fd::{AsFd, OwnedFd};

use super::seen::Watch;
use crate::config::{LinkPlan, Plan};
use crate::link;
use crate::sys::{clock, tty};
use crate::units::Mono;
use crate::wire::{Deframer, FromDrivers, parse_from_drivers};

/// A port that its dead owner has just left is tried again for so long.
const OPEN_WITHIN_NS: u64 = 2_000_000_000;

/// Adds what is heard until `until` to what the record showed.
///
/// # Errors
/// In one line, when a port cannot be opened or nobody speaks.
pub(super) fn after_the_drive(plan: &Plan, watch: &mut Watch<'_>, until: Mono) -> Result<(), String> {
    let mut ears = plan.links.iter().map(open).collect::<Result<Vec<_>, _>>()?;
    watch.drive_is_dead();
    while clock::now() < until {
        clock::sleep_ms(1);
        for (link, ear) in ears.iter_mut().enumerate() {
            ear.hear(link, watch);
        }
    }
    if ears.iter().all(|it| it.heard) {
        Ok(())
    } else {
        Err("the drivers said nothing after the drive was dead".into())
    }
}

fn open(link: &LinkPlan) -> Result<Ear, String> {
    let until = clock::now().plus_ns(OPEN_WITHIN_NS);
    loop {
        match link::open(&link.name, &link.port, link.baud) {
            Ok((port, _)) => return Ok(Ear { port, deframer: Deframer::new(), heard: false }),
            Err(error) if clock::now() >= until => return Err(error.to_string()),
            Err(_) => clock::sleep_ms(2),
        }
    }
}

/// One link, listened to.
struct Ear {
    port: OwnedFd,
    deframer: Deframer,
    heard: bool,
}

impl Ear {
    fn hear(&mut self, link: usize, watch: &mut Watch<'_>) {
        let mut bytes = [0; 1024];
        let got = tty::read(self.port.as_fd(), &mut bytes).unwrap_or(0);
        for &byte in bytes.get(..got).unwrap_or(&[]) {
            if let Some(Ok(plain)) = self.deframer.push(byte)
                && let Ok((_, FromDrivers::Feedback(feedback))) = parse_from_drivers(plain)
            {
                self.heard = true;
                watch.hear(clock::now(), link, &feedback);
            }
        }
    }
}
