//! The wheels as they are commanded and measured: counts, angles, standstill, and the heading that they or a gyro tell.

use arrayvec::ArrayVec;
use serde::{Deserialize, Serialize};

use super::MAX_LINKS;
use super::link::{Link, News};
use super::settings::Settings;
use crate::base::{Layout, Odometry, PerWheel, Twist};
use crate::units::{Mono, ns_to_s};
use crate::wire::{self, ChannelState, status};

/// What the wheels do.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Wheels {
    pub(super) measured_rad_s: PerWheel<f64>,
    /// Turned since the last tick.
    pub(super) moved_rad: PerWheel<f64>,
    last_angle: PerWheel<Option<i32>>,
    pub(super) odometry: Odometry,
    /// Since when every wheel has stood.
    pub(super) standing_since: Option<Mono>,
    gyro: Gyro,
}

/// Learnt of the yaw gyro.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Gyro {
    bias_rad_s: f64,
    used: bool,
}

/// The gyro's bias is learnt with this time constant while the base stands.
const BIAS_TIME_S: f64 = 2.0;

impl Wheels {
    pub(super) fn new(settings: &Settings) -> Self {
        Self {
            measured_rad_s: settings.wheels.iter().map(|_| 0.0).collect(),
            moved_rad: settings.wheels.iter().map(|_| 0.0).collect(),
            last_angle: settings.wheels.iter().map(|_| None).collect(),
            ..Self::default()
        }
    }

    /// Takes the feedback of this tick: speeds, angles, pose. Gives `Some` when the heading's source changed.
    pub(super) fn measure(
        &mut self,
        now: Mono,
        settings: &Settings,
        layout: &Layout,
        links: &[Link],
        news: &[News],
    ) -> Option<bool> {
        let parts = self.measured_rad_s.iter_mut().zip(&mut self.moved_rad).zip(&mut self.last_angle);
        for (wheel, ((speed, moved), last)) in settings.wheels.iter().zip(parts) {
            *moved = 0.0;
            let (Some(link), Some(news)) = (links.get(wheel.link), news.get(wheel.link)) else { continue };
            if news.restarted || !link.open {
                *last = None;
            }
            let state = link.heard.as_ref().and_then(|(_, it)| it.channels.get(wheel.channel));
            match state {
                Some(ChannelState { angle, speed: counts }) if news.fresh => {
                    *speed = f64::from(*counts) / wheel.counts_per_rad_s;
                    if let Some(before) = *last {
                        *moved = f64::from(angle.wrapping_sub(before)) * wheel.rad_per_count;
                    }
                    *last = Some(*angle);
                }
                Some(_) => {}
                None => *speed = 0.0,
            }
        }
        self.look_for_standstill(now, settings);
        let (heading, changed) = self.heading(now, settings, links, news);
        self.odometry.step(layout, &self.moved_rad, heading);
        changed
    }

    fn look_for_standstill(&mut self, now: Mono, settings: &Settings) {
        let share = settings.guard.standstill_share;
        let stands = self
            .measured_rad_s
            .iter()
            .zip(&settings.wheels)
            .all(|(speed, wheel)| speed.abs() <= share * wheel.max_rad_s);
        self.standing_since = if stands { self.standing_since.or(Some(now)) } else { None };
    }

    /// Every wheel has stood long enough.
    pub(super) fn stands(&self, now: Mono, settings: &Settings) -> bool {
        self.standing_since.is_some_and(|since| now.since_ns(since) >= settings.times.standstill_ns)
    }

    /// What the gyro says the base turned in this tick; `None` where the wheels must tell.
    fn heading(
        &mut self,
        now: Mono,
        settings: &Settings,
        links: &[Link],
        news: &[News],
    ) -> (Option<f64>, Option<bool>) {
        if !settings.gyro {
            return (None, None);
        }
        let teller = links.iter().zip(news).find(|(link, _)| link.status() & status::YAW_RATE_VALID != 0);
        let usable = teller.is_some();
        let changed = (usable != self.gyro.used).then_some(usable);
        self.gyro.used = usable;
        let Some((link, news)) = teller else { return (None, changed) };
        if !news.fresh || !news.continues {
            return (Some(0.0), changed);
        }
        let counts = link.heard.as_ref().map_or(0, |(_, feedback)| feedback.yaw_rate);
        let rate_rad_s = f64::from(counts) / wire::YAW_COUNTS_PER_RAD_S;
        let span_s = f64::from(news.clock_us) * 1e-6;
        if self.stands(now, settings) {
            let share = (span_s / BIAS_TIME_S).min(1.0);
            self.gyro.bias_rad_s += (rate_rad_s - self.gyro.bias_rad_s) * share;
            return (Some(0.0), changed);
        }
        (Some((rate_rad_s - self.gyro.bias_rad_s) * span_s), changed)
    }
}

/// Wheel speeds in counts, the same rounded back to rad/s.
pub(super) fn counts(settings: &Settings, wheel_rad_s: &PerWheel<f64>) -> (PerWheel<i16>, PerWheel<f64>) {
    let counts: PerWheel<i16> = settings
        .wheels
        .iter()
        .zip(wheel_rad_s)
        .map(|(wheel, speed)| {
            libm::round(speed * wheel.counts_per_rad_s).clamp(f64::from(-i16::MAX), f64::from(i16::MAX))
                as i16
        })
        .collect();
    let back = counts
        .iter()
        .zip(&settings.wheels)
        .map(|(it, wheel)| f64::from(*it) / wheel.counts_per_rad_s)
        .collect();
    (counts, back)
}

/// The counts of one link's channels; unused channels are zero.
pub(super) fn channels(settings: &Settings, link: usize, counts: &PerWheel<i16>) -> wire::PerChannel<i16> {
    let n = settings.links.get(link).map_or(0, |it| usize::from(it.channels));
    let mut channels: wire::PerChannel<i16> = (0..n).map(|_| 0).take(wire::MAX_CHANNELS).collect();
    for (wheel, counts) in settings.wheels.iter().zip(counts) {
        if wheel.link == link
            && let Some(channel) = channels.get_mut(wheel.channel)
        {
            *channel = *counts;
        }
    }
    channels
}

/// The most recent twists sent: what the drivers were told a while ago.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Sent {
    /// Newest last.
    twists: ArrayVec<Twist, 64>,
}

impl Sent {
    pub(super) fn push(&mut self, twist: Twist) {
        if self.twists.is_full() {
            self.twists.remove(0);
        }
        self.twists.push(twist);
    }

    /// The twist sent `ago_s` before the newest, and the one a tick before that; the oldest kept where that is too far.
    pub(super) fn ago(&self, ago_s: f64, period_ns: u64) -> (Twist, Twist) {
        let back = (ago_s / ns_to_s(period_ns)).max(0.0) as usize;
        let last = self.twists.len().saturating_sub(1);
        let at = last.saturating_sub(back);
        let it = self.twists.get(at).copied().unwrap_or_default();
        (it, self.twists.get(at.saturating_sub(1)).copied().unwrap_or(it))
    }

    pub(super) fn newest(&self) -> Twist {
        self.twists.last().copied().unwrap_or_default()
    }

    pub(super) fn rest(&mut self) {
        self.twists.clear();
    }
}

/// Links are few: kept here so that no other file needs the number.
pub(super) type PerLink<T> = ArrayVec<T, MAX_LINKS>;
