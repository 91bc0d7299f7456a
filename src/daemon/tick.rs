//! The tick's clock: a fixed grid. A tick that was missed is skipped, not caught up.

use crate::units::Mono;

/// The next point of the grid after `due` that is not before `now`.
#[must_use]
pub(super) fn next_deadline(due: Mono, now: Mono, period_ns: u64) -> Mono {
    let next = due.plus_ns(period_ns);
    if next >= now {
        return next;
    }
    let missed = now.since_ns(next).div_ceil(period_ns.max(1));
    next.plus_ns(missed.saturating_mul(period_ns))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_grid_never_drifts_and_nothing_is_caught_up() {
        let at = Mono::from_ns;
        assert_eq!(next_deadline(at(100), at(101), 10), at(110));
        assert_eq!(next_deadline(at(100), at(109), 10), at(110));
        assert_eq!(next_deadline(at(100), at(110), 10), at(110));
        assert_eq!(next_deadline(at(100), at(111), 10), at(120));
        assert_eq!(next_deadline(at(100), at(1111), 10), at(1120));
    }
}
