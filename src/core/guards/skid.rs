//! Skid: the part of the wheels' speeds that no motion of the base makes.

use serde::{Deserialize, Serialize};

use super::super::Cause;
use super::super::event::Event;
use super::super::settings::Settings;
use super::Look;
use crate::base::PerWheel;
use crate::units::Mono;

/// Since when the residual has been too large.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Skid {
    since: Option<Mono>,
    last_told: Option<Mono>,
}

/// Skids that come and go are told no more often than this.
const TELL_EVERY_NS: u64 = 1_000_000_000;

impl Skid {
    pub(super) fn rest(&mut self) {
        self.since = None;
    }

    pub(super) fn look(
        &mut self,
        look: &Look<'_>,
        residual: &PerWheel<f64>,
    ) -> (Option<Event>, Option<Cause>) {
        let settings = look.settings;
        let over = residual
            .iter()
            .zip(&settings.wheels)
            .any(|(it, wheel)| it.abs() > settings.guard.skid_share * wheel.max_rad_s);
        // Three wheels have no residual but rounding.
        if !over || settings.wheels.len() < 4 {
            self.since = None;
            return (None, None);
        }
        let wheel = skidding_wheel(residual, settings);
        let residual_rad_s = greatest(residual) as f32;
        let begins = self.since.is_none();
        let since = *self.since.get_or_insert(look.now);
        let tell = begins && self.last_told.is_none_or(|last| look.now.since_ns(last) >= TELL_EVERY_NS);
        if tell {
            self.last_told = Some(look.now);
        }
        let long = look.now.since_ns(since) >= settings.times.skid_ns;
        (
            tell.then_some(Event::Skidding { wheel, residual_rad_s }),
            long.then_some(Cause::Skid { wheel, residual_rad_s }),
        )
    }
}

/// The greatest residual of a wheel.
pub(super) fn greatest(residual: &PerWheel<f64>) -> f64 {
    residual.iter().fold(0.0, |most, it| it.abs().max(most))
}

/// The wheel whose own error explains the residual best: the largest normalised residual (Baarda, A testing procedure
/// for use in geodetic networks, 1968). With four wheels all are equal, so it tells nothing.
fn skidding_wheel(residual: &PerWheel<f64>, settings: &Settings) -> Option<u8> {
    if settings.wheels.len() < 5 {
        return None;
    }
    let mut best: Option<(u8, f64)> = None;
    for (index, (residual, share)) in (0_u8..).zip(residual.iter().zip(&settings.skid_share)) {
        if *share > 1e-6 {
            let normalised = residual.abs() / libm::sqrt(*share);
            if best.is_none_or(|(_, most)| normalised > most) {
                best = Some((index, normalised));
            }
        }
    }
    best.map(|(index, _)| index)
}
