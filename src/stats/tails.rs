//! The tails of the binomial distribution as plain sums of positive terms, smallest last.
//!
//! A sum needs at most a few times sqrt(n p q) terms and loses nothing, not even for 1 of a thousand million.

use super::density::binomial_density;

/// The chance of at most `k` hits in `n` tries that hit with the chance `p`.
pub(super) fn at_most(k: u64, n: u64, p: f64) -> f64 {
    if k >= n {
        1.0
    } else if (k as f64) < n as f64 * p {
        falling(k, n, p)
    } else {
        1.0 - rising(k + 1, n, p)
    }
}

/// The chance of at least `k` hits.
pub(super) fn at_least(k: u64, n: u64, p: f64) -> f64 {
    if k == 0 {
        1.0
    } else if k > n {
        0.0
    } else if k as f64 > n as f64 * p {
        rising(k, n, p)
    } else {
        1.0 - falling(k - 1, n, p)
    }
}

/// The terms k, k - 1, ... 0, for `k` below the mean.
fn falling(k: u64, n: u64, p: f64) -> f64 {
    let odds = (1.0 - p) / p;
    let ratio = |j: u64| j as f64 / (n - j + 1) as f64 * odds;
    binomial_density(k, n, p) * sum((1..=k).rev().map(ratio))
}

/// The terms k, k + 1, ... n, for `k` above the mean.
fn rising(k: u64, n: u64, p: f64) -> f64 {
    let odds = p / (1.0 - p);
    let ratio = |j: u64| (n - j) as f64 / (j + 1) as f64 * odds;
    binomial_density(k, n, p) * sum((k..n).map(ratio))
}

/// 1 + r1 + r1 r2 + ..., as far as it makes a difference.
fn sum(ratios: impl Iterator<Item = f64>) -> f64 {
    let (mut sum, mut term) = (1.0, 1.0);
    for ratio in ratios {
        term *= ratio;
        let next = sum + term;
        if next == sum {
            break;
        }
        sum = next;
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// Every outcome by itself, for small numbers.
    fn plain(ks: impl Iterator<Item = u64>, n: u64, p: f64) -> f64 {
        let choose = |k: u64| (0..k).fold(1.0, |c, j| c * (n - j) as f64 / (j + 1) as f64);
        ks.map(|k| choose(k) * p.powi(k as i32) * (1.0 - p).powi((n - k) as i32))
            .sum()
    }

    proptest! {
        #[test]
        fn tails_are_the_plain_sums(n in 1_u64..40, k in 0_u64..40, p in 0.001..0.999_f64) {
            prop_assume!(k <= n);
            let (below, above) = (plain(0..=k, n, p), plain(k..=n, n, p));
            prop_assert!((at_most(k, n, p) / below - 1.0).abs() < 1e-11);
            prop_assert!((at_least(k, n, p) / above - 1.0).abs() < 1e-11);
        }
    }

    #[test]
    fn the_ends_are_certain() {
        assert_eq!(
            (at_most(5, 5, 0.3), at_least(0, 5, 0.3), at_least(6, 5, 0.3)),
            (1.0, 1.0, 0.0)
        );
    }
}
