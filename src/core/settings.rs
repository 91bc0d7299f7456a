//! What the core needs of a plan, in its own units, fixed after start.

use arrayvec::ArrayVec;

use super::MAX_LINKS;
use super::hold::HoldSettings;
use super::sent::KEPT_TWISTS;
use crate::base::PerWheel;
use crate::config::{GuardPlan, HeadingSource, LinkPlan, Plan};
use crate::shaping::{Pace, ShaperSettings};
use crate::units::s_to_ns;

/// Assumed of drivers whose delay is not configured: a velocity loop of 100 Hz and a frame each way (common practice).
pub const ASSUMED_DRIVER_MS: f64 = 20.0;

/// How one wheel hangs on its line.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct WheelSettings {
    pub(super) link: usize,
    pub(super) channel: usize,
    /// Counts of the driver per rad/s of the wheel, negative where reversed.
    pub(super) counts_per_rad_s: f64,
    /// Radians of the wheel per count of angle, negative where reversed.
    pub(super) rad_per_count: f64,
    pub(super) max_rad_s: f64,
}

/// What Identity must say.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct LinkSettings {
    pub(super) expect: arrayvec::ArrayString<24>,
    pub(super) channels: u8,
    pub(super) speed_lsb_urad_s: u32,
    pub(super) angle_lsb_urad: u32,
    pub(super) valid_ms: u16,
}

/// `[guard]` in nanoseconds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Times {
    pub(super) pad_quiet_stream_ns: u64,
    pub(super) pad_quiet_change_ns: u64,
    pub(super) feedback_quiet_ns: u64,
    pub(super) not_heard_ns: u64,
    pub(super) late_ns: u64,
    pub(super) driver_ns: u64,
    pub(super) follow_ns: u64,
    pub(super) slowing_ns: u64,
    /// The command must have been zero for so long: the lag of drivers and wheels and what the guard adds.
    pub(super) runaway_ns: u64,
    pub(super) skid_ns: u64,
    pub(super) standstill_ns: u64,
    pub(super) stop_margin_ns: u64,
    pub(super) ready_idle_ns: u64,
    pub(super) reset_hold_ns: u64,
}

impl Times {
    fn new(guard: &GuardPlan) -> Self {
        let ms = |value: f64| s_to_ns(value * 1e-3);
        let driver_ms = guard.driver_ms.unwrap_or(ASSUMED_DRIVER_MS);
        Self {
            pad_quiet_stream_ns: ms(guard.pad_quiet_stream_ms),
            pad_quiet_change_ns: ms(guard.pad_quiet_change_ms),
            feedback_quiet_ns: ms(guard.feedback_quiet_ms),
            not_heard_ns: ms(guard.not_heard_ms),
            late_ns: ms(guard.late_ms),
            driver_ns: ms(driver_ms),
            follow_ns: s_to_ns(guard.follow_s),
            slowing_ns: s_to_ns(guard.slowing_s),
            runaway_ns: ms(driver_ms) + s_to_ns(guard.follow_lag_s) + s_to_ns(guard.runaway_s),
            skid_ns: s_to_ns(guard.skid_s),
            standstill_ns: s_to_ns(guard.standstill_s),
            stop_margin_ns: s_to_ns(guard.stop_margin_s),
            ready_idle_ns: s_to_ns(guard.ready_idle_s),
            reset_hold_ns: s_to_ns(guard.reset_hold_s),
        }
    }
}

/// Everything fixed.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Settings {
    pub(super) wheels: PerWheel<WheelSettings>,
    pub(super) links: ArrayVec<LinkSettings, MAX_LINKS>,
    pub(super) paces: ArrayVec<Pace, 32>,
    pub(super) hold: HoldSettings,
    pub(super) times: Times,
    pub(super) guard: GuardPlan,
    pub(super) wired: bool,
    pub(super) gyro: bool,
    pub(super) period_ns: u64,
    /// Of the twists sent, every so-manieth is kept for looking back, so that the drivers' delay always fits.
    pub(super) kept_every: u16,
    /// How many kept twists the drivers' delay goes back.
    pub(super) driver_back: usize,
    /// Longest ramp that can be needed, ms: what Identity's `ramp_max_ms` must bear.
    pub(super) longest_ramp_ms: u16,
    /// Diagonal of the projection on the skid space, a wheel: how much of its own error a wheel shows.
    pub(super) skid_share: PerWheel<f64>,
}

impl Settings {
    pub(super) fn new(plan: &Plan) -> Self {
        let wheels = plan.wheels.iter().map(|wheel| {
            let link = plan.links.get(wheel.link);
            let sign = if wheel.reversed { -1.0 } else { 1.0 };
            let speed_lsb = link.map_or(1.0, |it| f64::from(it.speed_lsb_urad_s)) * 1e-6;
            let angle_lsb = link.map_or(1.0, |it| f64::from(it.angle_lsb_urad)) * 1e-6;
            WheelSettings {
                link: wheel.link,
                channel: usize::from(wheel.channel),
                counts_per_rad_s: sign * wheel.gear / speed_lsb,
                rad_per_count: sign * angle_lsb / wheel.gear,
                max_rad_s: wheel.max_rad_s,
            }
        });
        let wheels: PerWheel<WheelSettings> = wheels.take(crate::base::MAX_WHEELS).collect();
        let skid_share = (0..wheels.len())
            .map(|wheel| {
                let unit = (0..wheels.len()).map(|it| if it == wheel { 1.0 } else { 0.0 }).collect();
                plan.layout.skid(&unit).get(wheel).copied().unwrap_or(0.0)
            })
            .collect();
        let times = Times::new(&plan.guard);
        let period_ns = plan.tick.period_ns().max(1);
        let driver_ticks = times.driver_ns.div_ceil(period_ns);
        let kept_every = driver_ticks.div_ceil(KEPT_TWISTS as u64 - 2).max(1);
        Self {
            wheels,
            links: plan.links.iter().map(link_settings).take(MAX_LINKS).collect(),
            paces: plan.paces.iter().map(|it| it.pace).take(32).collect(),
            hold: HoldSettings {
                on: plan.pad.hold_on,
                off: plan.pad.hold_off,
                squeeze: plan.pad.hold_squeeze,
            },
            times,
            guard: plan.guard.clone(),
            wired: plan.pad.wired,
            gyro: plan.room.heading == HeadingSource::Gyro,
            period_ns,
            kept_every: u16::try_from(kept_every).unwrap_or(u16::MAX),
            driver_back: usize::try_from(driver_ticks / kept_every).unwrap_or(0),
            longest_ramp_ms: longest_ramp_ms(plan),
            skid_share,
        }
    }

    /// How many frames the drivers' delay keeps in flight.
    pub(super) fn in_flight(&self) -> u16 {
        u16::try_from(self.times.driver_ns.div_ceil(self.period_ns)).unwrap_or(u16::MAX)
    }
}

fn link_settings(link: &LinkPlan) -> LinkSettings {
    LinkSettings {
        expect: arrayvec::ArrayString::from(&link.expect).unwrap_or_default(),
        channels: link.channels,
        speed_lsb_urad_s: link.speed_lsb_urad_s,
        angle_lsb_urad: link.angle_lsb_urad,
        valid_ms: link.valid_ms,
    }
}

/// Time of the drivers' ramp to zero from given speeds: the longest that any limit wants; at least 1 ms, since 0 would
/// take the torque off at once.
#[must_use]
pub fn ramp_ms(
    limits: &crate::shaping::Limits,
    twist: crate::base::Twist,
    wheels: impl Iterator<Item = f64>,
) -> u16 {
    let seconds = wheels.fold(
        (twist.travel_m_s() / limits.stop_m_s2).max(twist.turn_rad_s.abs() / limits.turn_rad_s2),
        f64::max,
    );
    libm::ceil(seconds * 1e3 - 1e-6).clamp(1.0, f64::from(u16::MAX)) as u16
}

/// The longest ramp that a plan can need: that of its fastest pace.
#[must_use]
pub fn longest_ramp_ms(plan: &Plan) -> u16 {
    plan.paces.iter().map(|it| pace_ramp_ms(plan, &it.pace)).max().unwrap_or(1)
}

/// The longest ramp that one pace can need: full travel and full turn at once.
#[must_use]
pub fn pace_ramp_ms(plan: &Plan, pace: &Pace) -> u16 {
    let twist = crate::base::Twist::new(pace.turn_rad_s, pace.travel_m_s, 0.0);
    let wheels = plan.layout.rows().iter().zip(&plan.wheels).map(|([turn, x, y], wheel)| {
        let speed = turn.abs() * pace.turn_rad_s + libm::hypot(*x, *y) * pace.travel_m_s;
        speed.min(wheel.max_rad_s) / wheel.max_rad_s2
    });
    ramp_ms(&plan.limits, twist, wheels)
}

/// The shaper's settings of a plan.
#[must_use]
pub fn shaper_settings(plan: &Plan) -> ShaperSettings {
    let max_rad_s = plan.wheels.iter().map(|it| it.max_rad_s).collect();
    let max_rad_s2 = plan.wheels.iter().map(|it| it.max_rad_s2).collect();
    ShaperSettings::new(
        plan.layout.clone(),
        (max_rad_s, max_rad_s2),
        plan.limits,
        plan.pad.response,
        plan.tick.period_s(),
        plan.room.lead_ms * 1e-3,
    )
}
