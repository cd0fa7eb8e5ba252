//! How sure a count is: exact bounds on the chance behind it.
//!
//! C. J. Clopper and E. S. Pearson, "The use of confidence or fiducial limits illustrated in the case of the binomial",
//! Biometrika 26 (1934) 404-413.

use super::root::reaches;
use super::share::Share;
use super::tails;

/// `hits` of `of`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Count {
    hits: u64,
    of: u64,
}

/// Both bounds on a chance.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Interval {
    /// Lower bound.
    pub low: f64,
    /// Upper bound.
    pub high: f64,
}

impl Count {
    /// `hits` of `of`.
    ///
    /// # Panics
    /// When there are more hits than tries.
    pub fn new(hits: u64, of: u64) -> Self {
        assert!(hits <= of, "{hits} of {of}");
        Self { hits, of }
    }

    /// How many there were.
    pub fn hits(self) -> u64 {
        self.hits
    }

    /// Of how many.
    pub fn of(self) -> u64 {
        self.of
    }

    /// The plain ratio; `None` of nothing.
    pub fn ratio(self) -> Option<f64> {
        (self.of > 0).then(|| self.hits as f64 / self.of as f64)
    }

    /// The two-sided interval: each of its ends is wrong with at most half of what is missing to `confidence`.
    pub fn between(self, confidence: Share) -> Interval {
        let each = confidence.rest() / 2.0;
        Interval {
            low: self.lower(each),
            high: self.upper(each),
        }
    }

    /// The one-sided upper bound.
    pub fn at_most(self, confidence: Share) -> f64 {
        self.upper(confidence.rest())
    }

    /// The one-sided lower bound.
    pub fn at_least(self, confidence: Share) -> f64 {
        self.lower(confidence.rest())
    }

    /// The chance at which as few hits as these still come with the chance `alpha`.
    fn upper(self, alpha: f64) -> f64 {
        let Self { hits, of } = self;
        if hits == of {
            1.0
        } else if hits == 0 {
            -f64::exp_m1(alpha.ln() / of as f64)
        } else {
            reaches(-alpha, 0.0, 1.0, |p| -tails::at_most(hits, of, p))
        }
    }

    /// The chance at which as many hits as these still come with the chance `alpha`.
    fn lower(self, alpha: f64) -> f64 {
        let Self { hits, of } = self;
        if hits == 0 {
            0.0
        } else if hits == of {
            (alpha.ln() / of as f64).exp()
        } else {
            reaches(alpha, 0.0, 1.0, |p| tails::at_least(hits, of, p))
        }
    }
}

/// What no failure in `n` tries says at 95 % confidence, in the head: at most 3 / n.
///
/// E. Eypasch, R. Lefering, C. K. Kum, H. Troidl, "Probability of adverse events that have not yet occurred: a statistical
/// reminder", BMJ 311 (1995) 619-620.
pub fn rule_of_three(n: u64) -> f64 {
    3.0 / n as f64
}

/// The smallest number of tries which, all without failure, bound the chance of one by `at_most` with `confidence`.
pub fn fewest_without_failure(at_most: Share, confidence: Share) -> u64 {
    let bound = |n: u64| Count::new(0, n).at_most(confidence);
    let mut n = (confidence.rest().ln() / f64::ln_1p(-at_most.value())).ceil() as u64;
    // The quotient may be a whole number on paper and miss it by a bit.
    while n > 1 && bound(n - 1) <= at_most.value() {
        n -= 1;
    }
    while bound(n) > at_most.value() {
        n += 1;
    }
    n
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn close(found: f64, wanted: f64) {
        assert!((found / wanted - 1.0).abs() < 1e-9, "{found} for {wanted}");
    }

    /// The R help page of binom.test (W. J. Conover, "Practical nonparametric statistics", 1971), the docstring of
    /// scipy.stats.binomtest, and beta.ppf of scipy 1.17.
    #[test]
    fn published_bounds() {
        for (hits, of, low, high) in [
            (682, 925, 0.707_668_264_079_039, 0.765_406_558_241_478_1),
            (5, 100, 0.016_431_879_181_728_278, 0.112_834_911_105_462_88),
            (1, 300, 8.438_913_231_780_044e-5, 0.018_431_252_048_067_885),
            (
                3,
                1_000_000,
                6.186_725_501_906_401e-7,
                8.767_247_788_067_677e-6,
            ),
            (
                20,
                20_000_001,
                6.108_260_523_170_799e-7,
                1.544_418_397_517_917_1e-6,
            ),
        ] {
            let interval = Count::new(hits, of).between(Share::P95);
            close(interval.low, low);
            close(interval.high, high);
        }
        close(
            Count::new(3, 15).at_least(Share::P95),
            0.056_846_867_590_246_81,
        );
    }

    /// Closed form, and the smallest n that books print: 59 for 5 %, 299 for 1 %, 2995 for 0.1 %.
    #[test]
    fn without_a_failure() {
        let none = Count::new(0, 100).between(Share::P95);
        assert_eq!(none.low, 0.0);
        close(none.high, 0.036_216_692_645_190_54);
        for (n, wanted) in [
            (10, 0.258_865_550_893_052_3),
            (59, 0.049_507_609_888_227),
            (299, 0.009_969_146_792_899_286),
            (3000, 0.000_998_079_011_996_555_5),
        ] {
            close(Count::new(0, n).at_most(Share::P95), wanted);
        }
        for (at_most, n) in [
            (0.1, 29),
            (0.05, 59),
            (0.02, 149),
            (0.01, 299),
            (0.005, 598),
            (0.001, 2995),
            (0.0001, 29956),
        ] {
            let at_most = Share::new(at_most).unwrap();
            assert_eq!(fewest_without_failure(at_most, Share::P95), n);
        }
    }

    /// Eypasch et al. 1995: 3 / n is the exact bound but for the last digit.
    #[test]
    fn the_rule_of_three_is_near_the_exact_bound() {
        for n in [30, 100, 300, 1000, 3000] {
            let exact = Count::new(0, n).at_most(Share::P95);
            let rule = rule_of_three(n);
            assert!(rule > exact && rule < exact * 1.06, "{n}: {rule} {exact}");
        }
    }

    #[test]
    fn nothing_and_everything() {
        let nothing = Count::new(0, 0).between(Share::P95);
        assert_eq!((nothing.low, nothing.high), (0.0, 1.0));
        assert_eq!(Count::new(0, 0).ratio(), None);
        let all = Count::new(100, 100).between(Share::P95);
        assert_eq!(all.high, 1.0);
        close(1.0 - all.low, 0.036_216_692_645_190_54);
    }

    proptest! {
        #[test]
        fn hits_and_the_others_mirror_each_other(of in 1_u64..500, hits in 0_u64..500) {
            prop_assume!(hits <= of);
            let there = Count::new(hits, of).between(Share::P95);
            let back = Count::new(of - hits, of).between(Share::P95);
            prop_assert!((there.low + back.high - 1.0).abs() < 1e-12);
            prop_assert!((there.high + back.low - 1.0).abs() < 1e-12);
            prop_assert!(there.low <= hits as f64 / of as f64 && hits as f64 / of as f64 <= there.high);
        }
    }
}
