//! What the numbers mean: points and spans of time, and the few conversions that are needed in more than one place.
//!
//! Inside the program: metres, seconds, radians, kilograms are never needed. Names carry their unit. Degrees and
//! milliseconds appear only in what people write and on the wire.

use serde::{Deserialize, Serialize};

/// A point on the monotonic clock, in nanoseconds since an origin that is the same for the whole process.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub struct Mono(u64);

impl Mono {
    /// The point `ns` nanoseconds after the clock's origin.
    #[must_use]
    pub const fn from_ns(ns: u64) -> Self {
        Self(ns)
    }

    /// Nanoseconds since the clock's origin.
    #[must_use]
    pub const fn ns(self) -> u64 {
        self.0
    }

    /// Nanoseconds from `earlier` to `self`; 0 when `earlier` is the later one.
    #[must_use]
    pub const fn since_ns(self, earlier: Self) -> u64 {
        self.0.saturating_sub(earlier.0)
    }

    /// Seconds from `earlier` to `self`; 0 when `earlier` is the later one.
    #[must_use]
    pub fn since_s(self, earlier: Self) -> f64 {
        ns_to_s(self.since_ns(earlier))
    }

    /// The point `ns` nanoseconds later, at most the end of the clock.
    #[must_use]
    pub const fn plus_ns(self, ns: u64) -> Self {
        Self(self.0.saturating_add(ns))
    }
}

/// Nanoseconds to seconds. Exact to a nanosecond up to 104 days, and never worse than 1 part in 2^53.
#[must_use]
pub fn ns_to_s(ns: u64) -> f64 {
    ns as f64 * 1e-9
}

/// Seconds to nanoseconds, rounded; negative and not-a-number give 0.
#[must_use]
pub fn s_to_ns(s: f64) -> u64 {
    libm::round(s * 1e9) as u64
}

/// Degrees to radians.
#[must_use]
pub fn rad(deg: f64) -> f64 {
    deg * (core::f64::consts::PI / 180.0)
}

/// Radians to degrees.
#[must_use]
pub fn deg(rad: f64) -> f64 {
    rad * (180.0 / core::f64::consts::PI)
}

/// An angle brought into -pi to pi (IEEE 754 remainder).
#[must_use]
pub fn wrap_rad(angle_rad: f64) -> f64 {
    libm::remainder(angle_rad, 2.0 * core::f64::consts::PI)
}
