//! Chance from a seed: the same seed makes the same drive on every machine.

/// SplitMix64 (Steele, Lea and Flood, Fast splittable pseudorandom number generators, 2014).
#[derive(Clone, Debug)]
pub(crate) struct Chance(u64);

impl Chance {
    /// A source of its own for each purpose, so that one more draw in one place changes nothing elsewhere.
    pub(crate) fn new(seed: u64, purpose: u64) -> Self {
        let mut it = Self(seed ^ purpose.wrapping_mul(0xd1b5_4a32_d192_ed03));
        it.bits();
        it
    }

    pub(crate) fn bits(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let z = (self.0 ^ (self.0 >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    /// From 0 to below 1.
    pub(crate) fn even(&mut self) -> f64 {
        (self.bits() >> 11) as f64 / 9_007_199_254_740_992.0
    }

    pub(crate) fn within(&mut self, from: f64, to: f64) -> f64 {
        from + (to - from) * self.even()
    }

    /// A whole number below `n`.
    pub(crate) fn below(&mut self, n: usize) -> usize {
        (self.even() * n as f64) as usize
    }

    pub(crate) fn one_in(&mut self, n: usize) -> bool {
        self.below(n) == 0
    }

    pub(crate) fn pick<T: Copy>(&mut self, of: &[T]) -> T {
        of[self.below(of.len())]
    }
}
