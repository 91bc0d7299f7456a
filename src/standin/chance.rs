//! Chance from a seed: the same seed gives the same numbers on every machine.

/// SplitMix64 (Steele, Lea and Flood 2014): small, seedable, good enough for noise; never for secrets.
#[derive(Clone, Debug)]
pub(super) struct Chance(u64);

impl Chance {
    /// A source of its own for each `purpose`, so that one more draw in one place changes nothing elsewhere.
    pub(super) fn new(seed: u64, purpose: u64) -> Self {
        let mut chance = Self(seed ^ purpose.wrapping_mul(0xd1b5_4a32_d192_ed03));
        chance.next();
        chance
    }

    /// 64 even bits.
    pub(super) fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let z = (self.0 ^ (self.0 >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    /// 16 even bits.
    pub(super) fn bits16(&mut self) -> u16 {
        (self.next() >> 48) as u16
    }

    /// Evenly spread from 0 to below 1.
    pub(super) fn even(&mut self) -> f64 {
        (self.next() >> 11) as f64 * (1.0 / 9_007_199_254_740_992.0)
    }

    /// Normally spread round 0 with a standard deviation of 1 (Box and Muller 1958).
    pub(super) fn normal(&mut self) -> f64 {
        let radius = libm::sqrt(-2.0 * libm::log(1.0 - self.even()));
        radius * libm::cos(2.0 * core::f64::consts::PI * self.even())
    }

    /// How many go well before the next one fails, when each fails with `probability` (geometric law).
    pub(super) fn until_failure(&mut self, probability: f64) -> u64 {
        if probability <= 0.0 {
            return u64::MAX;
        }
        if probability >= 1.0 {
            return 0;
        }
        // A cast from float to integer takes what is too large to the greatest.
        (libm::log(1.0 - self.even()) / libm::log1p(-probability)) as u64
    }
}

#[cfg(test)]
mod tests {
    use super::Chance;

    /// First outputs of SplitMix64 for seed 1234567: the reference values that accompany the published generator
    /// (from memory: 6457827717110365317, 3203168211198807973, 9817491932198370423).
    #[test]
    fn gives_the_published_numbers() {
        let mut chance = Chance(1_234_567);
        assert_eq!(chance.next(), 6_457_827_717_110_365_317);
        assert_eq!(chance.next(), 3_203_168_211_198_807_973);
        assert_eq!(chance.next(), 9_817_491_932_198_370_423);
    }

    /// Mean and spread of 100,000 draws within five standard errors of the laws' own.
    #[test]
    fn has_the_moments_of_its_laws() {
        let mut chance = Chance::new(7, 0);
        let n = 100_000;
        let draws: Vec<f64> = (0..n).map(|_| chance.normal()).collect();
        let mean = draws.iter().sum::<f64>() / f64::from(n);
        let variance = draws.iter().map(|x| x * x).sum::<f64>() / f64::from(n);
        assert!(mean.abs() < 5.0 / f64::from(n).sqrt(), "{mean}");
        assert!((variance - 1.0).abs() < 5.0 * (2.0 / f64::from(n)).sqrt(), "{variance}");
        let p = 0.01;
        let runs: f64 = (0..n).map(|_| chance.until_failure(p) as f64).sum::<f64>() / f64::from(n);
        let expected = (1.0 - p) / p;
        assert!((runs - expected).abs() < 5.0 * ((1.0 - p) / (p * p) / f64::from(n)).sqrt(), "{runs}");
        assert_eq!(chance.until_failure(0.0), u64::MAX);
        assert_eq!(chance.until_failure(1.0), 0);
    }
}
