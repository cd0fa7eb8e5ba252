//! The incomplete gamma function, regularised.
//!
//! Series and continued fraction are those of Abramowitz & Stegun 6.5.29 and 6.5.31, the fraction evaluated by Lentz's method
//! as in Press et al., "Numerical Recipes", 3rd edition, 5.2 and 6.2.

use super::density::gamma_kernel;

/// P(a, x), the chance that a gamma variable with `a` above 0 is at most `x`.
pub(super) fn gamma_at_most(a: f64, x: f64) -> f64 {
    if x <= 0.0 {
        0.0
    } else if x < a + 1.0 {
        gamma_kernel(a, x) / a * series(a, x)
    } else {
        1.0 - gamma_kernel(a, x) / fraction(a, x)
    }
}

/// 1 + x / (a + 1) + x^2 / ((a + 1)(a + 2)) + ...
fn series(a: f64, x: f64) -> f64 {
    let (mut sum, mut term) = (1.0, 1.0);
    for n in 1_u32.. {
        term *= x / (a + f64::from(n));
        let next = sum + term;
        if next == sum {
            break;
        }
        sum = next;
    }
    sum
}

/// x + 1 - a - 1(1 - a) / (x + 3 - a - 2(2 - a) / (x + 5 - a - ...)), for `x` of at least a + 1.
fn fraction(a: f64, x: f64) -> f64 {
    // In place of a zero that must not be divided by.
    let off_zero = |value: f64| if value.abs() < 1e-300 { 1e-300 } else { value };
    let mut value = off_zero(x + 1.0 - a);
    let (mut c, mut d) = (value, 0.0);
    for n in 1_u32.. {
        let n = f64::from(n);
        let (above, below) = (-n * (n - a), x + 2.0 * n + 1.0 - a);
        d = 1.0 / off_zero(below + above * d);
        c = off_zero(below + above / c);
        let factor = c * d;
        value *= factor;
        if (factor - 1.0).abs() <= f64::EPSILON {
            break;
        }
    }
    value
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        /// P(n, x) is the chance that a Poisson variable of mean x is at least n: Abramowitz & Stegun 26.4.21.
        #[test]
        fn it_is_the_poisson_sum(n in 1_u32..40, x in 0.001..80.0_f64) {
            let mut term = (-x).exp();
            let mut below = 0.0;
            for k in 0..n {
                below += term;
                term *= x / f64::from(k + 1);
            }
            let gamma = gamma_at_most(f64::from(n), x);
            prop_assert!((gamma - (1.0 - below)).abs() < 1e-12, "{gamma} {below}");
        }
    }

    #[test]
    fn nothing_is_below_zero() {
        assert_eq!(gamma_at_most(3.0, 0.0), 0.0);
    }
}
