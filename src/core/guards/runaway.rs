//! Wheels that turn without being told: under torque a runaway, without it a base that is pushed.

use serde::{Deserialize, Serialize};

use super::super::Cause;
use super::super::event::Event;
use super::Look;
use crate::base::PerWheel;
use crate::units::Mono;

/// Since when each wheel has been told to stand, and how far it has turned since it should have stood.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Runaway {
    told_to_stand: PerWheel<Option<(Mono, f64)>>,
}

impl Runaway {
    pub(super) fn new(wheels: usize) -> Self {
        Self { told_to_stand: (0..wheels).map(|_| None).collect() }
    }

    pub(super) fn rest(&mut self) {
        self.told_to_stand.iter_mut().for_each(|it| *it = None);
    }

    /// A wheel that turns faster than its share, and goes on until it has moved by its angle, although it has long
    /// been told to stand.
    pub(super) fn look(&mut self, look: &Look<'_>) -> Option<Cause> {
        let settings = look.settings;
        let told = look.layout.wheel_speeds(look.sent.newest());
        let mut cause = None;
        let timers = self.told_to_stand.iter_mut().zip(&settings.wheels);
        let speeds = told.iter().zip(look.wheels.measured_rad_s.iter().zip(&look.wheels.moved_rad));
        for (index, ((timer, wheel), (told, (measured, moved)))) in (0_u8..).zip(timers.zip(speeds)) {
            // Less than half a count is sent as zero.
            if (told * wheel.counts_per_rad_s).abs() >= 0.5 {
                *timer = None;
                continue;
            }
            let (since, path) = timer.get_or_insert((look.now, 0.0));
            let turns = measured.abs() > settings.guard.runaway_share * wheel.max_rad_s;
            if look.now.since_ns(*since) < settings.times.runaway_ns || !turns {
                *path = 0.0;
                continue;
            }
            *path += moved;
            if path.abs() > settings.guard.runaway_rad && cause.is_none() {
                cause = Some(Cause::Runaway { wheel: index, measured_rad_s: *measured as f32 });
            }
        }
        cause
    }
}

/// Somebody pushes the base: told once until it stands again.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Pushed {
    told: bool,
}

impl Pushed {
    pub(super) fn look(&mut self, look: &Look<'_>) -> Option<Event> {
        let share = look.settings.guard.runaway_share;
        let wheels = look.wheels.measured_rad_s.iter().zip(&look.settings.wheels);
        let turning = (0_u8..)
            .zip(wheels)
            .find(|(_, (speed, wheel))| speed.abs() > share * wheel.max_rad_s)
            .map(|(index, _)| index);
        if turning.is_none() && look.wheels.stands(look.now, look.settings) {
            self.told = false;
        }
        let wheel = turning.filter(|_| !self.told)?;
        self.told = true;
        Some(Event::Pushed { wheel })
    }
}
