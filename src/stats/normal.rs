//! The normal distribution.

use std::f64::consts::FRAC_1_SQRT_2;

use super::root::reaches;

/// The chance that a standard normal variable is at most `z`.
pub(super) fn normal_at_most(z: f64) -> f64 {
    0.5 * libm::erfc(-z * FRAC_1_SQRT_2)
}

/// The value that a standard normal variable exceeds with the chance 1 - `share`; `share` lies between 0 and 1.
pub(super) fn normal_quantile(share: f64) -> f64 {
    // Beyond 38 the tail is smaller than the smallest number. From the upper half the tail that is small is asked for.
    if share > 0.5 {
        -reaches(1.0 - share, -38.5, 0.0, normal_at_most)
    } else {
        reaches(share, -38.5, 0.0, normal_at_most)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Abramowitz & Stegun, table 26.5 (from memory; the outside check asks scipy).
    #[test]
    fn the_usual_quantiles() {
        for (share, z) in [
            (0.5, 0.0),
            (0.95, 1.644_853_626_951_472),
            (0.975, 1.959_963_984_540_054),
            (0.999, 3.090_232_306_167_813),
            (0.05, -1.644_853_626_951_472),
        ] {
            let found = normal_quantile(share);
            assert!((found - z).abs() < 1e-12, "{share}: {found}");
        }
    }
}
