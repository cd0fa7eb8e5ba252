//! Where a rising function reaches a value.

/// The place in `low..=high` at which the rising function `f` reaches `value`, to the last bit that `f` can tell.
///
/// Plain bisection: about 60 to 80 calls, and no starting point or derivative that could lead astray.
pub(super) fn reaches(value: f64, mut low: f64, mut high: f64, f: impl Fn(f64) -> f64) -> f64 {
    loop {
        let middle = low + (high - low) / 2.0;
        if middle <= low || middle >= high {
            return middle;
        }
        if f(middle) < value {
            low = middle;
        } else {
            high = middle;
        }
    }
}

/// As [`reaches`], for a function on the whole line; the bracket grows until it holds the place.
pub(super) fn reaches_somewhere(value: f64, f: impl Fn(f64) -> f64) -> f64 {
    let (mut low, mut high) = (-1.0, 1.0);
    while f(low) > value && f64::is_finite(low * 2.0) {
        low *= 2.0;
    }
    while f(high) < value && f64::is_finite(high * 2.0) {
        high *= 2.0;
    }
    reaches(value, low, high, f)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_cube_root_is_found_to_the_last_bits() {
        assert!((reaches(2.0, 0.0, 2.0, |x| x * x * x) - 2f64.cbrt()).abs() < 1e-15);
        assert!((reaches_somewhere(-1e9, |x| x * x * x) + 1000.0).abs() < 1e-12);
    }
}
