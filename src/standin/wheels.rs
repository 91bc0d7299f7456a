//! Wheels of first order whose drivers push only so hard: du/dt = (target - u) / lag, all rates of one driver scaled
//! together where one of its wheels would need more than its greatest acceleration.
//!
//! With one factor for all, the distance to the target shrinks along a straight line, so one number g (1 at the
//! beginning, 0 at the target) tells where every wheel is, in closed form:
//!
//! ```text
//! s  = max |target_i - u_i| / (greatest acceleration_i x lag)
//! g' = -1 / (lag s) while s g > 1          constant acceleration
//! g' = -g / lag     from then on           exponential
//! u_i(t) = target_i - (target_i - u_i(0)) g(t)
//! ```
//!
//! A set of speeds free of skid that is given targets free of skid stays free of it.

/// One wheel of a driver.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Chase {
    /// Speed now, rad/s.
    pub(super) speed_rad_s: f64,
    /// Where it is to go, rad/s.
    pub(super) target_rad_s: f64,
    /// Greatest acceleration, rad/s^2.
    pub(super) max_rad_s2: f64,
}

/// How far all wheels of one driver have come after some time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Progress {
    /// What is left of the way to the target: 1 to 0.
    left: f64,
    /// Integral of that over the time, seconds.
    left_s: f64,
    dt_s: f64,
}

impl Progress {
    /// After `dt_s`, with one time constant `lag_s` for all.
    pub(super) fn of(wheels: impl Iterator<Item = Chase>, lag_s: f64, dt_s: f64) -> Self {
        let seconds = |w: Chase| libm::fabs(w.target_rad_s - w.speed_rad_s) / w.max_rad_s2;
        let longest_s = wheels.map(seconds).fold(0.0, f64::max);
        // With constant acceleration all the way, the target would be reached in `longest_s`.
        let straight_s = (longest_s - lag_s).clamp(0.0, dt_s);
        let (left, left_s) = if longest_s > 0.0 {
            let left = 1.0 - straight_s / longest_s;
            (left, straight_s * (1.0 + left) / 2.0)
        } else {
            (1.0, 0.0)
        };
        let rest_s = dt_s - straight_s;
        if lag_s <= 0.0 {
            let arrived = rest_s > 0.0;
            return Self { left: if arrived { 0.0 } else { left }, left_s, dt_s };
        }
        let decay = libm::exp(-rest_s / lag_s);
        Self { left: left * decay, left_s: left_s + left * lag_s * (1.0 - decay), dt_s }
    }

    /// Speed after the time, and the angle turned in it.
    pub(super) fn apply(&self, wheel: Chase) -> (f64, f64) {
        let gap = wheel.target_rad_s - wheel.speed_rad_s;
        (wheel.target_rad_s - gap * self.left, wheel.target_rad_s * self.dt_s - gap * self.left_s)
    }
}

#[cfg(test)]
mod tests {
    #![expect(clippy::float_cmp, reason = "values that are set, or handed on as they are")]

    use super::*;

    fn run(from: f64, to: f64, max_rad_s2: f64, lag_s: f64, dt_s: f64) -> (f64, f64) {
        let wheel = Chase { speed_rad_s: from, target_rad_s: to, max_rad_s2 };
        Progress::of([wheel].into_iter(), lag_s, dt_s).apply(wheel)
    }

    /// Step response of a first-order lag, K (1 - exp(-t/T)); its integral K (t - T (1 - exp(-t/T))): any control
    /// engineering handbook.
    #[test]
    fn follows_a_step_as_a_first_order_lag() {
        for t in [0.001, 0.01, 0.03, 0.1, 1.0] {
            let (u, angle) = run(0.0, 10.0, 1e9, 0.03, t);
            assert!((u - 10.0 * (1.0 - f64::exp(-t / 0.03))).abs() < 1e-6, "{u}");
            assert!((angle - 10.0 * (t - 0.03 * (1.0 - f64::exp(-t / 0.03)))).abs() < 1e-6, "{angle}");
        }
        let (u, _) = run(0.0, 10.0, 1e9, 0.03, 0.03);
        assert!((u - 6.3212).abs() < 1e-3, "63.2 % after one time constant");
    }

    /// v = a t, s = a t^2 / 2 while the acceleration is at its limit; v^2 = 2 a s.
    #[test]
    fn accelerates_evenly_while_the_limit_holds() {
        let (u, angle) = run(0.0, 100.0, 50.0, 0.03, 1.0);
        assert!((u - 50.0).abs() < 1e-9);
        assert!((angle - 25.0).abs() < 1e-9);
        let (u, angle) = run(20.0, -100.0, 50.0, 0.0, 0.4);
        assert!(u.abs() < 1e-9);
        assert!((u * u - (400.0 - 2.0 * 50.0 * angle)).abs() < 1e-9);
    }

    /// Many short steps and one long one are the same: nothing depends on how often it is called.
    #[test]
    fn does_not_depend_on_the_step() {
        let whole = run(-3.0, 30.0, 120.0, 0.04, 0.5);
        let (mut u, mut angle) = (-3.0, 0.0);
        for _ in 0..1000 {
            let (next, by) = run(u, 30.0, 120.0, 0.04, 0.0005);
            u = next;
            angle += by;
        }
        assert!((whole.0 - u).abs() < 1e-9 && (whole.1 - angle).abs() < 1e-9, "{whole:?} {u} {angle}");
    }

    #[test]
    fn one_weak_wheel_slows_all_by_one_factor() {
        let strong = Chase { speed_rad_s: 0.0, target_rad_s: 20.0, max_rad_s2: 1000.0 };
        let weak = Chase { speed_rad_s: 0.0, target_rad_s: -10.0, max_rad_s2: 50.0 };
        let progress = Progress::of([strong, weak].into_iter(), 0.02, 0.1);
        assert_eq!(progress.apply(weak).0, -5.0);
        assert_eq!(progress.apply(strong).0, 10.0);
    }

    #[test]
    fn at_the_target_it_stays() {
        assert_eq!(run(4.0, 4.0, 10.0, 0.03, 0.5), (4.0, 2.0));
        assert_eq!(run(4.0, 4.0, 10.0, 0.0, 0.5), (4.0, 2.0));
        assert_eq!(run(0.0, 5.0, 10.0, 0.03, 0.0), (0.0, 0.0));
    }
}
