//! The guards that look at the wheels: not following, not slowing, runaway, skid. Those on pad, links and ticks stand
//! in the step, where their inputs are.

use serde::{Deserialize, Serialize};

use super::Cause;
use super::event::Event;
use super::settings::Settings;
use super::wheels::{Sent, Wheels};
use crate::base::{Layout, PerWheel};
use crate::units::{Mono, ns_to_s};

/// Timers of the wheel guards.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct WheelGuards {
    /// Since when each wheel has been away from its command.
    astray_since: PerWheel<Option<Mono>>,
    /// Since when each wheel has been told to stand, and how far it has moved since the lag was over.
    told_to_stand: PerWheel<Option<(Mono, f64)>>,
    skid_since: Option<Mono>,
    pushed: bool,
}

/// What the guards look at.
pub(super) struct Look<'a> {
    pub(super) now: Mono,
    pub(super) settings: &'a Settings,
    pub(super) layout: &'a Layout,
    pub(super) wheels: &'a Wheels,
    pub(super) sent: &'a Sent,
}

impl WheelGuards {
    pub(super) fn new(settings: &Settings) -> Self {
        Self {
            astray_since: settings.wheels.iter().map(|_| None).collect(),
            told_to_stand: settings.wheels.iter().map(|_| None).collect(),
            ..Self::default()
        }
    }

    /// Forgets what was timed under torque.
    pub(super) fn rest(&mut self) {
        self.astray_since.iter_mut().for_each(|it| *it = None);
        self.told_to_stand.iter_mut().for_each(|it| *it = None);
        self.skid_since = None;
    }

    /// While following commands: a wheel away from what it was told.
    pub(super) fn not_following(&mut self, look: &Look<'_>) -> Option<Cause> {
        let settings = look.settings;
        let (then, before) = look.sent.ago(settings.driver_s(), settings.period_ns);
        let told = look.layout.wheel_speeds(then);
        let told_before = look.layout.wheel_speeds(before);
        let rate = settings.follow_lag_s() / ns_to_s(settings.period_ns);
        let mut cause = None;
        let rows = self.astray_since.iter_mut().zip(&settings.wheels).zip(&look.wheels.measured_rad_s);
        for (index, ((((since, wheel), measured), told), told_before)) in
            (0_u8..).zip(rows.zip(&told).zip(&told_before))
        {
            let allowed = settings.guard.follow_share * wheel.max_rad_s + (told - told_before).abs() * rate;
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

    /// Under torque: a wheel that turns although it has long been told to stand.
    pub(super) fn runaway(&mut self, look: &Look<'_>) -> Option<Cause> {
        let settings = look.settings;
        let lag_ns = settings.times.driver_ns + crate::units::s_to_ns(settings.follow_lag_s());
        let told = look.layout.wheel_speeds(look.sent.newest());
        let mut cause = None;
        let rows = self.told_to_stand.iter_mut().zip(&settings.wheels).zip(&look.wheels.measured_rad_s);
        for (index, ((((stand, wheel), measured), told), moved)) in
            (0_u8..).zip(rows.zip(&told).zip(&look.wheels.moved_rad))
        {
            if told.abs() > 0.5 / wheel.counts_per_rad_s.abs() {
                *stand = None;
                continue;
            }
            let (since, path) = stand.get_or_insert((look.now, 0.0));
            if look.now.since_ns(*since) < lag_ns + settings.times.runaway_ns {
                continue;
            }
            *path += moved;
            let turns = measured.abs() > settings.guard.runaway_share * wheel.max_rad_s;
            if turns && path.abs() > settings.guard.runaway_rad && cause.is_none() {
                cause = Some(Cause::Runaway { wheel: index, measured_rad_s: *measured as f32 });
            }
        }
        cause
    }

    /// Under torque: the part of the wheels' speeds that no motion of the base makes.
    pub(super) fn skid(&mut self, look: &Look<'_>) -> (f64, Option<Event>, Option<Cause>) {
        let settings = look.settings;
        let residual = look.layout.skid(&look.wheels.measured_rad_s);
        let greatest = residual.iter().fold(0.0_f64, |most, it| most.max(it.abs()));
        let over = residual
            .iter()
            .zip(&settings.wheels)
            .any(|(it, wheel)| it.abs() > settings.guard.skid_share * wheel.max_rad_s);
        if !over || settings.wheels.len() < 4 {
            self.skid_since = None;
            return (greatest, None, None);
        }
        let wheel = skidding_wheel(&residual, settings);
        let residual_rad_s = greatest as f32;
        let began = self.skid_since.is_none();
        let since = *self.skid_since.get_or_insert(look.now);
        let event = began.then_some(Event::Skidding { wheel, residual_rad_s });
        let long = look.now.since_ns(since) >= settings.times.skid_ns;
        (greatest, event, long.then_some(Cause::Skid { wheel, residual_rad_s }))
    }

    /// Without torque: somebody pushes the base. Said once until it stands again.
    pub(super) fn pushed(&mut self, look: &Look<'_>) -> Option<Event> {
        let share = look.settings.guard.runaway_share;
        let turning = look
            .wheels
            .measured_rad_s
            .iter()
            .zip(&look.settings.wheels)
            .position(|(speed, wheel)| speed.abs() > share * wheel.max_rad_s);
        match turning {
            Some(wheel) if !self.pushed => {
                self.pushed = true;
                Some(Event::Pushed { wheel: u8::try_from(wheel).unwrap_or(u8::MAX) })
            }
            Some(_) => None,
            None => {
                self.pushed &= !look.wheels.stands(look.now, look.settings);
                None
            }
        }
    }
}

/// The wheel whose own error explains the residual best: the largest normalised residual (Baarda's test). With four
/// wheels all are equal, so it tells nothing.
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

/// A stop by the drivers, as it should go.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct DriverStop {
    pub(super) began: Mono,
    pub(super) ramp_ms: u16,
    /// Wheel speeds at its start.
    from_rad_s: PerWheel<f64>,
    /// Torque was already taken off because it did not slow.
    escalated: bool,
}

impl DriverStop {
    pub(super) fn new(began: Mono, ramp_ms: u16, from_rad_s: PerWheel<f64>) -> Self {
        Self { began, ramp_ms, from_rad_s, escalated: ramp_ms == 0 }
    }

    /// A wheel that does not slow down within its time: torque must go off at once. Said once.
    pub(super) fn not_slowing(&mut self, look: &Look<'_>) -> Option<Cause> {
        let age_ns = look.now.since_ns(self.began);
        let ramp_s = f64::from(self.ramp_ms) * 1e-3;
        let settings = look.settings;
        let watched = settings.times.slowing_ns + settings.times.driver_ns;
        if self.escalated || age_ns < watched || ns_to_s(age_ns) > ramp_s + settings.driver_s() {
            return None;
        }
        let delay_s = settings.driver_s() + settings.follow_lag_s();
        let left = (1.0 - (ns_to_s(age_ns) - delay_s) / ramp_s).clamp(0.0, 1.0);
        let rows = self.from_rad_s.iter().zip(&look.wheels.measured_rad_s).zip(&settings.wheels);
        for (index, ((from, measured), wheel)) in (0_u8..).zip(rows) {
            if measured.abs() > from.abs() * left + settings.guard.follow_share * wheel.max_rad_s {
                self.escalated = true;
                return Some(Cause::NotSlowing {
                    wheel: index,
                    commanded_rad_s: (from * left) as f32,
                    measured_rad_s: *measured as f32,
                });
            }
        }
        None
    }

    pub(super) fn escalated(&self) -> bool {
        self.escalated
    }
}
