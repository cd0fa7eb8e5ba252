//! Tolerance limits that assume no distribution: one of the largest measurements serves as the limit.
//!
//! S. S. Wilks, "Determination of sample sizes for setting tolerance limits", Annals of Mathematical Statistics 12 (1941)
//! 91-96.

use super::share::Share;
use super::tails::at_least;

/// With which confidence `coverage` of the population lies below the `place`-th largest of `n` measurements.
fn sure(n: u64, place: u64, coverage: Share) -> f64 {
    // The chance that at least `place` of n lie above the wanted quantile.
    at_least(place, n, coverage.rest())
}

/// Which of the `n` measurements to take, counted from the largest as 1, so that at least `coverage` of the population lies
/// below it with `confidence`; `None` if there are too few. A larger place leaves out that many less one as strays.
pub fn order_limit(n: u64, coverage: Share, confidence: Share) -> Option<u64> {
    let good = |place: u64| sure(n, place, coverage) >= confidence.value();
    let mut places = 0..n;
    // The confidence falls with the place: halve until one is left.
    while places.start < places.end {
        let middle = places.start + (places.end - places.start) / 2;
        if good(middle + 1) {
            places.start = middle + 1;
        } else {
            places.end = middle;
        }
    }
    (places.start > 0).then_some(places.start)
}

/// The smallest number of measurements whose `place`-th largest (from 1) is such a limit. With a place of 2 it is also
/// the number at which the smallest and the largest together hold `coverage` between them.
pub fn fewest_for_order_limit(place: u64, coverage: Share, confidence: Share) -> u64 {
    let place = place.max(1);
    let good = |n: u64| sure(n, place, coverage) >= confidence.value();
    let mut high = place;
    while !good(high) {
        high *= 2;
    }
    let mut low = place.max(high / 2);
    while low < high {
        let middle = low + (high - low) / 2;
        if good(middle) {
            high = middle;
        } else {
            low = middle + 1;
        }
    }
    low
}

#[cfg(test)]
mod tests {
    use super::*;

    fn share(value: f64) -> Share {
        Share::new(value).unwrap()
    }

    /// Wilks' numbers as the books print them at 95 % confidence (from memory; the outside check asks scipy).
    #[test]
    fn the_usual_sample_sizes() {
        for (place, coverage, n) in [
            (1, 0.95, 59),
            (1, 0.99, 299),
            (1, 0.999, 2995),
            (2, 0.95, 93),
            (2, 0.99, 473),
            (3, 0.95, 124),
        ] {
            let found = fewest_for_order_limit(place, share(coverage), Share::P95);
            assert_eq!(found, n, "place {place}, {coverage}");
        }
    }

    #[test]
    fn place_and_number_agree() {
        let coverage = share(0.95);
        assert_eq!(order_limit(58, coverage, Share::P95), None);
        for n in 59..400 {
            let place = order_limit(n, coverage, Share::P95).unwrap();
            assert!(fewest_for_order_limit(place, coverage, Share::P95) <= n);
            assert!(fewest_for_order_limit(place + 1, coverage, Share::P95) > n);
        }
    }
}
