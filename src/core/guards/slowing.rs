//! Not slowing: a stop by the drivers, held against the ramp that they were given.

use serde::{Deserialize, Serialize};

use super::super::Cause;
use super::Look;
use crate::base::PerWheel;
use crate::units::{Mono, ns_to_s};

/// A stop by the drivers, as it should go.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(in super::super) struct DriverStop {
    began: Mono,
    pub(in super::super) ramp_ms: u16,
    /// Wheel speeds at its start.
    from_rad_s: PerWheel<f64>,
    /// A wheel was found not to slow down: told once.
    told: bool,
}

impl DriverStop {
    pub(in super::super) fn new(began: Mono, ramp_ms: u16, from_rad_s: PerWheel<f64>) -> Self {
        Self { began, ramp_ms, from_rad_s, told: false }
    }

    /// A stop of wheels that somebody before us has told to turn: how fast they were is not known, so nothing can be
    /// held against them.
    pub(in super::super) fn of_others(began: Mono, ramp_ms: u16) -> Self {
        Self { told: true, ..Self::new(began, ramp_ms, PerWheel::new()) }
    }

    /// The ramp's time is over, and with it the torque.
    pub(super) fn is_over(&self, look: &Look<'_>) -> bool {
        look.now.since_ns(self.began) > self.ramp_ns() + look.settings.times.driver_ns
    }

    fn ramp_ns(&self) -> u64 {
        u64::from(self.ramp_ms) * 1_000_000
    }

    /// From a while after the ramp's start on: a wheel that is faster than the ramp, late by the drivers' delay and
    /// the lag of a sound wheel, allows. Torque must then go off at once.
    pub(super) fn not_slowing(&mut self, look: &Look<'_>) -> Option<Cause> {
        let settings = look.settings;
        let age_ns = look.now.since_ns(self.began);
        let watched_ns = settings.times.slowing_ns + settings.times.driver_ns;
        if self.told || self.ramp_ms == 0 || age_ns < watched_ns || self.is_over(look) {
            return None;
        }
        let delay_s = ns_to_s(settings.times.driver_ns) + settings.guard.follow_lag_s;
        let left = (1.0 - (ns_to_s(age_ns) - delay_s) / ns_to_s(self.ramp_ns())).clamp(0.0, 1.0);
        let speeds = self.from_rad_s.iter().zip(&look.wheels.measured_rad_s).zip(&settings.wheels);
        let (wheel, should, is) = (0_u8..).zip(speeds).find_map(|(index, ((from, measured), wheel))| {
            let should = from.abs() * left;
            let fast = measured.abs() > should + settings.guard.follow_share * wheel.max_rad_s;
            fast.then_some((index, from * left, *measured))
        })?;
        self.told = true;
        Some(Cause::NotSlowing { wheel, commanded_rad_s: should as f32, measured_rad_s: is as f32 })
    }
}
