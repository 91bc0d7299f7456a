//! The moving average, in whole numbers: its running sum is exact, never drifts, and ends at exactly zero.

use arrayvec::ArrayVec;
use serde::{Deserialize, Serialize};

use crate::base::Twist;

/// The most samples; a configuration whose smoothing needs more is refused.
pub const MAX_SAMPLES: usize = 512;

/// Steps in one unit of a twist: 2^40, so that 512 samples of up to 8,000 rad/s still fit a sum of 64 bits.
const STEPS: f64 = (1_u64 << 40) as f64;

/// Mean of the last twists (Biagiotti & Melchiorri: a chain of FIR filters bounds acceleration and jerk).
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Average {
    samples: ArrayVec<[i64; 3], MAX_SAMPLES>,
    sum: [i64; 3],
    oldest: u16,
}

impl Average {
    /// Of `samples` twists (at least one, at most [`MAX_SAMPLES`]), all zero.
    #[must_use]
    pub fn new(samples: usize) -> Self {
        let samples = (0..samples.clamp(1, MAX_SAMPLES)).map(|_| [0; 3]).collect();
        Self { samples, sum: [0; 3], oldest: 0 }
    }

    /// Takes the newest twist and gives the mean of the last ones.
    pub fn push(&mut self, newest: Twist) -> Twist {
        let newest = steps(newest);
        if let Some(place) = self.samples.get_mut(usize::from(self.oldest)) {
            for ((sum, new), old) in self.sum.iter_mut().zip(newest).zip(*place) {
                *sum += new - old;
            }
            *place = newest;
        }
        self.oldest += 1;
        if usize::from(self.oldest) >= self.samples.len() {
            self.oldest = 0;
        }
        self.mean()
    }

    /// The mean of the samples.
    #[must_use]
    pub fn mean(&self) -> Twist {
        let scale = 1.0 / (STEPS * self.samples.len() as f64);
        let [turn, x, y] = self.sum;
        Twist::new(turn as f64 * scale, x as f64 * scale, y as f64 * scale)
    }

    /// Turns the travel part of every sample by an angle.
    pub fn rotate(&mut self, angle_rad: f64) {
        let mut sum = [0_i64; 3];
        for sample in &mut self.samples {
            let [turn, x, y] = *sample;
            let turned = Twist::new(0.0, x as f64, y as f64).rotated(angle_rad);
            *sample = [turn, libm::round(turned.x_m_s) as i64, libm::round(turned.y_m_s) as i64];
            for (sum, part) in sum.iter_mut().zip(*sample) {
                *sum += part;
            }
        }
        self.sum = sum;
    }

    /// All samples zero.
    pub fn rest(&mut self) {
        self.samples.iter_mut().for_each(|it| *it = [0; 3]);
        self.sum = [0; 3];
    }

    /// Whether every sample is zero.
    #[must_use]
    pub fn at_rest(&self) -> bool {
        self.sum == [0; 3] && self.samples.iter().all(|it| *it == [0; 3])
    }

    /// How many samples there are.
    #[must_use]
    pub fn len(&self) -> usize {
        self.samples.len()
    }

    /// Never: there is at least one sample.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.samples.is_empty()
    }
}

fn steps(twist: Twist) -> [i64; 3] {
    [twist.turn_rad_s, twist.x_m_s, twist.y_m_s].map(|it| libm::round(it * STEPS) as i64)
}
