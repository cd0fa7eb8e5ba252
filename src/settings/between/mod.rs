//! Keys that are each right by themselves but contradict each other.
//!
//! Every check is a small function that names the numbers it compared, says what would go wrong, and what to do. The
//! value that is advised passes the check it came from.

mod belt;
mod names;
mod outlets;
mod picture;
mod shapes;

use super::fields::Settings;

/// What is wrong, and the key at which it is shown.
pub(super) struct Finding {
    pub(super) key: String,
    pub(super) message: String,
}

/// What has been found so far.
#[derive(Default)]
pub(super) struct Findings(pub(super) Vec<Finding>);

impl Findings {
    /// At `key` one would have expected `expected`, because of `why`.
    pub(super) fn add(&mut self, key: impl Into<String>, expected: &str, why: &str) {
        self.0.push(Finding {
            key: key.into(),
            message: format!("expected {expected}: {why}"),
        });
    }
}

/// Everything that contradicts something else.
pub(super) fn check(settings: &Settings) -> Vec<Finding> {
    let mut found = Findings::default();
    picture::check(settings, &mut found);
    shapes::check(settings, &mut found);
    names::check(settings, &mut found);
    belt::check(settings, &mut found);
    outlets::check(settings, &mut found);
    found.0
}

/// A number for a sentence: about as many digits as anyone sets.
pub(super) fn n(number: f64) -> String {
    let shown = format!("{number:.*}", decimals(number));
    if shown.contains('.') {
        shown.trim_end_matches('0').trim_end_matches('.').to_owned()
    } else {
        shown
    }
}

/// The same, but never below `number`: for "at least".
pub(super) fn up(number: f64) -> String {
    n(shown(number, |shown| shown < number, 1.0))
}

/// The same, but never above `number`: for "at most".
pub(super) fn down(number: f64) -> String {
    n(shown(number, |shown| shown > number, -1.0))
}

fn shown(number: f64, misses: impl Fn(f64) -> bool, step: f64) -> f64 {
    let unit = 10_f64.powi(decimals(number) as i32);
    let nearest = (number * unit).round() / unit;
    if misses(nearest) {
        ((number * unit).round() + step) / unit
    } else {
        nearest
    }
}

fn decimals(number: f64) -> usize {
    match number.abs() {
        size if size >= 100.0 => 1,
        size if size >= 1.0 => 2,
        _ => 4,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_are_short_and_advice_errs_to_the_safe_side() {
        assert_eq!(
            [n(214.61), n(2.0), n(0.25), n(100.0)],
            ["214.6", "2", "0.25", "100"]
        );
        assert_eq!([up(214.61), up(2.001), up(0.25)], ["214.7", "2.01", "0.25"]);
        assert_eq!(
            [down(214.69), down(1.999), down(0.25)],
            ["214.6", "1.99", "0.25"]
        );
        assert_eq!(down(-0.5), "-0.5");
    }
}
