//! What the wheels were told: twists of the last ticks, and their way into counts.

use arrayvec::ArrayVec;
use serde::{Deserialize, Serialize};

use super::settings::Settings;
use crate::base::{PerWheel, Twist};
use crate::wire;

/// How many twists are kept for looking back.
pub(super) const KEPT_TWISTS: usize = 256;

/// The most recent twists sent: what the drivers were told a while ago.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Sent {
    newest: Twist,
    /// A ring, filled from the front.
    kept: ArrayVec<Twist, KEPT_TWISTS>,
    /// Place in the ring that comes next.
    next: u16,
    /// Ticks since the last one that was kept.
    passed: u16,
}

impl Sent {
    /// Takes the twist of this tick and keeps one in every `kept_every`.
    pub(super) fn push(&mut self, twist: Twist, kept_every: u16) {
        self.newest = twist;
        self.passed += 1;
        if self.passed < kept_every {
            return;
        }
        self.passed = 0;
        match self.kept.get_mut(usize::from(self.next)) {
            Some(place) => *place = twist,
            None => {
                let _ = self.kept.try_push(twist);
            }
        }
        self.next = (self.next + 1) % KEPT_TWISTS as u16;
    }

    /// The twist kept `back` entries before the newest; zero before anything was sent.
    pub(super) fn back(&self, back: usize) -> Twist {
        let at = (usize::from(self.next) + 2 * KEPT_TWISTS - 1 - back.min(KEPT_TWISTS - 1)) % KEPT_TWISTS;
        self.kept.get(at).copied().unwrap_or_default()
    }

    pub(super) fn newest(&self) -> Twist {
        self.newest
    }

    pub(super) fn rest(&mut self) {
        *self = Self::default();
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

/// The counts of one link's channels; all zero without any given. Unused channels are zero.
pub(super) fn channels(
    settings: &Settings,
    link: usize,
    counts: Option<&PerWheel<i16>>,
) -> wire::PerChannel<i16> {
    let n = settings.links.get(link).map_or(0, |it| usize::from(it.channels));
    let mut channels: wire::PerChannel<i16> = (0..n).map(|_| 0).take(wire::MAX_CHANNELS).collect();
    for (wheel, counts) in settings.wheels.iter().zip(counts.into_iter().flatten()) {
        if wheel.link == link
            && let Some(channel) = channels.get_mut(wheel.channel)
        {
            *channel = *counts;
        }
    }
    channels
}

#[cfg(test)]
#[expect(clippy::float_cmp, reason = "what comes out is what went in")]
mod tests {
    use super::*;

    #[test]
    fn looking_back_gives_what_was_sent_then_and_zero_before_that() {
        let mut sent = Sent::default();
        for tick in 1..=1000 {
            sent.push(Twist::new(f64::from(tick), 0.0, 0.0), 1);
            for back in [0, 1, 7, 254] {
                let then = (tick - back).max(0);
                assert_eq!(sent.back(usize::try_from(back).unwrap()).turn_rad_s, f64::from(then));
            }
        }
    }

    #[test]
    fn one_in_three_is_kept_and_the_newest_always() {
        let mut sent = Sent::default();
        for tick in 1..=11 {
            sent.push(Twist::new(f64::from(tick), 0.0, 0.0), 3);
        }
        assert_eq!(sent.newest().turn_rad_s, 11.0);
        assert_eq!([0, 1, 2, 3].map(|it| sent.back(it).turn_rad_s), [9.0, 6.0, 3.0, 0.0]);
    }
}
