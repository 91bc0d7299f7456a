//! Heading from the yaw gyro in the feedback. Its bias is learnt while the base is known to stand.

use serde::{Deserialize, Serialize};

use super::link::{Link, News};
use crate::wire::{YAW_COUNTS_PER_RAD_S, status};

/// What is known of the gyro.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Gyro {
    bias_rad_s: f64,
    /// How long it has been learnt, up to [`BIAS_TIME_S`].
    learnt_s: f64,
    used: bool,
}

/// The bias is the plain mean of the first standstill, until that is this long; then it follows with this time
/// constant. Slow against noise, quick against the drift of a warming gyro (minutes; common practice).
const BIAS_TIME_S: f64 = 2.0;

impl Gyro {
    /// What the gyro says the base turned since the last feedback; `None` where the wheels must tell. Second: the
    /// source changed, and whether the gyro is it now.
    pub(super) fn turned(
        &mut self,
        links: &[Link],
        news: &[News],
        still: bool,
    ) -> (Option<f64>, Option<bool>) {
        let teller = links.iter().zip(news).find(|(link, _)| link.status() & status::YAW_RATE_VALID != 0);
        let usable = teller.is_some();
        let changed = (usable != self.used).then_some(usable);
        self.used = usable;
        let Some((link, news)) = teller else { return (None, changed) };
        if !news.fresh || !news.continues {
            return (Some(0.0), changed);
        }
        let counts = link.heard.as_ref().map_or(0, |(_, feedback)| feedback.yaw_rate);
        let rate_rad_s = f64::from(counts) / YAW_COUNTS_PER_RAD_S;
        let span_s = f64::from(news.clock_us) * 1e-6;
        if still {
            self.learn(rate_rad_s, span_s);
            return (Some(0.0), changed);
        }
        // Before the first standstill its bias is not known.
        let turned = (self.learnt_s > 0.0).then_some((rate_rad_s - self.bias_rad_s) * span_s);
        (turned, changed)
    }

    fn learn(&mut self, rate_rad_s: f64, span_s: f64) {
        self.learnt_s = (self.learnt_s + span_s).min(BIAS_TIME_S);
        if self.learnt_s > 0.0 {
            self.bias_rad_s += (rate_rad_s - self.bias_rad_s) * (span_s / self.learnt_s).min(1.0);
        }
    }
}
