//! The wheels as they are measured: speeds, angles, standstill, pose.

use serde::{Deserialize, Serialize};

use super::gyro::Gyro;
use super::link::{Link, News};
use super::settings::Settings;
use crate::base::{Layout, Odometry, PerWheel};
use crate::units::Mono;
use crate::wire::ChannelState;

/// What the wheels do.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Wheels {
    pub(super) measured_rad_s: PerWheel<f64>,
    /// Turned since the last tick.
    pub(super) moved_rad: PerWheel<f64>,
    last_angle: PerWheel<Option<i32>>,
    pub(super) odometry: Odometry,
    /// Since when every wheel has stood.
    standing_since: Option<Mono>,
    gyro: Gyro,
}

impl Wheels {
    pub(super) fn new(settings: &Settings) -> Self {
        Self {
            measured_rad_s: settings.wheels.iter().map(|_| 0.0).collect(),
            moved_rad: settings.wheels.iter().map(|_| 0.0).collect(),
            last_angle: settings.wheels.iter().map(|_| None).collect(),
            ..Self::default()
        }
    }

    /// Takes the feedback of this tick: speeds, angles, pose. `told_to_stand`: the drivers are and were told to stand.
    /// Gives `Some` when the heading's source changed: whether it is the gyro now.
    pub(super) fn measure(
        &mut self,
        now: Mono,
        settings: &Settings,
        layout: &Layout,
        (links, news): (&[Link], &[News]),
        told_to_stand: bool,
    ) -> Option<bool> {
        let parts = self.measured_rad_s.iter_mut().zip(&mut self.moved_rad).zip(&mut self.last_angle);
        for (wheel, ((speed, moved), last)) in settings.wheels.iter().zip(parts) {
            *moved = 0.0;
            let (Some(link), Some(news)) = (links.get(wheel.link), news.get(wheel.link)) else { continue };
            let state = link.heard.as_ref().and_then(|(_, it)| it.channels.get(wheel.channel));
            match state {
                Some(ChannelState { angle, speed: counts }) if news.fresh => {
                    *speed = f64::from(*counts) / wheel.counts_per_rad_s;
                    if let Some(before) = last.filter(|_| news.continues) {
                        *moved = f64::from(angle.wrapping_sub(before)) * wheel.rad_per_count;
                    }
                    *last = Some(*angle);
                }
                Some(_) => {}
                None => {
                    *speed = 0.0;
                    *last = None;
                }
            }
        }
        self.look_for_standstill(now, settings);
        if !settings.gyro {
            self.odometry.step(layout, &self.moved_rad, None);
            return None;
        }
        let still = told_to_stand && self.stands(now, settings) && self.hardly_moves(settings);
        let (heading, changed) = self.gyro.turned(links, news, still);
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

    /// No angle moved by more than the rounding of encoders.
    fn hardly_moves(&self, settings: &Settings) -> bool {
        self.moved_rad
            .iter()
            .zip(&settings.wheels)
            .all(|(moved, wheel)| moved.abs() <= 1.5 * wheel.rad_per_count.abs())
    }
}
