//! Not following: a wheel away from what it was told.

use serde::{Deserialize, Serialize};

use super::super::Cause;
use super::Look;
use crate::base::PerWheel;
use crate::units::{Mono, ns_to_s};

/// Since when each wheel has been away from its command.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Following {
    astray_since: PerWheel<Option<Mono>>,
}

impl Following {
    pub(super) fn new(wheels: usize) -> Self {
        Self { astray_since: (0..wheels).map(|_| None).collect() }
    }

    pub(super) fn rest(&mut self) {
        self.astray_since.iter_mut().for_each(|it| *it = None);
    }

    /// Measured against the command of the drivers' delay ago; a sound wheel may lag behind by the commanded
    /// acceleration times its lag (the steady ramp error of a first-order follower).
    pub(super) fn look(&mut self, look: &Look<'_>) -> Option<Cause> {
        let settings = look.settings;
        let told = look.layout.wheel_speeds(look.sent.back(settings.driver_back));
        let told_before = look.layout.wheel_speeds(look.sent.back(settings.driver_back + 1));
        let kept_s = ns_to_s(settings.period_ns) * f64::from(settings.kept_every);
        let rate = settings.guard.follow_lag_s / kept_s;
        let mut cause = None;
        let since = self.astray_since.iter_mut().zip(&settings.wheels);
        let speeds = look.wheels.measured_rad_s.iter().zip(told.iter().zip(&told_before));
        for (index, ((since, wheel), (measured, (told, before)))) in (0_u8..).zip(since.zip(speeds)) {
            let allowed = settings.guard.follow_share * wheel.max_rad_s + (told - before).abs() * rate;
            if (measured - told).abs() <= allowed {
                *since = None;
                continue;
            }
            let began = *since.get_or_insert(look.now);
            if look.now.since_ns(began) >= settings.times.follow_ns && cause.is_none() {
                cause = Some(Cause::NotFollowing {
                    wheel: index,
                    commanded_rad_s: *told as f32,
                    measured_rad_s: *measured as f32,
                });
            }
        }
        cause
    }
}
