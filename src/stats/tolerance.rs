//! How many standard deviations around the mean hold a stated share of a normal population with a stated confidence.
//!
//! One-sided: exact. The factor k is the one at which mean + k s exceeds the wanted quantile with the stated confidence,
//! that is the quantile of a noncentral t variable (G. J. Hahn and W. Q. Meeker, "Statistical Intervals", 1991, chapter 4).
//! Two-sided: exact as well, from the defining integral over the error of the mean (A. Wald and J. Wolfowitz, "Tolerance limits
//! for a normal distribution", Annals of Mathematical Statistics 17 (1946) 208-215). Tables and handbooks often print W. G.
//! Howe's approximation instead (Journal of the American Statistical Association 64 (1969) 610-620), which is within one
//! per cent from 10 measurements on.
//!
//! Both integrals run over a whole line along which the integrand is smooth and dies away on both sides: there the trapezoid
//! rule is exact to the last digits once its step resolves the narrowest factor (L. N. Trefethen and J. A. C. Weideman, SIAM
//! Review 56 (2014) 385-458).

use std::f64::consts::PI;

use super::density::stirling_error;
use super::gamma::gamma_at_most;
use super::normal::{normal_at_most, normal_quantile};
use super::root::{reaches, reaches_somewhere};
use super::share::Share;

/// k for the limit mean + k s that `coverage` of a normal population stays below, from `n` measurements; `None` of fewer
/// than 2.
pub fn one_sided_factor(n: u64, coverage: Share, confidence: Share) -> Option<f64> {
    let z = normal_quantile(coverage.value());
    let sure = |k: f64| chance_of_enough(n, z, k);
    (n >= 2).then(|| reaches_somewhere(confidence.value(), sure))
}

/// k for the limits mean - k s and mean + k s that hold `coverage` of a normal population, from `n` measurements; `None` of
/// fewer than 2.
pub fn two_sided_factor(n: u64, coverage: Share, confidence: Share) -> Option<f64> {
    if n < 2 {
        return None;
    }
    let nodes = mean_errors(n, coverage);
    let freedom = (n - 1) as f64;
    // The chance that s is large enough for k s to reach the half width, over all errors of the mean.
    let too_narrow = |k: f64| -> f64 {
        let chance = |half: f64| gamma_at_most(freedom / 2.0, freedom * (half / k).powi(2) / 2.0);
        nodes
            .iter()
            .map(|&(weight, half)| weight * chance(half))
            .sum()
    };
    let mut most = 1.0;
    while too_narrow(most) > confidence.rest() {
        most *= 2.0;
    }
    Some(reaches(-confidence.rest(), 0.0, most, |k| -too_narrow(k)))
}

/// Errors that the mean of `n` standard normal measurements may have: for each its weight, and the half width around it
/// that holds `coverage`.
fn mean_errors(n: u64, coverage: Share) -> Vec<(f64, f64)> {
    const STEP: f64 = 0.1;
    let node = |j: u32| {
        let t = f64::from(j) * STEP;
        let error = t / (n as f64).sqrt();
        let held = |half: f64| normal_at_most(error + half) - normal_at_most(error - half);
        // Either sign of the error asks for the same half width.
        let sides = if j == 0 { 1.0 } else { 2.0 };
        let weight = sides * STEP * (-t * t / 2.0).exp() / (2.0 * PI).sqrt();
        (weight, reaches(coverage.value(), 0.0, error + 40.0, held))
    };
    (0..90).map(node).collect()
}

/// The chance that mean + k s of `n` standard normal measurements is at least `z`: for a given s a normal probability, and
/// an integral over u = ln s.
fn chance_of_enough(n: u64, z: f64, k: f64) -> f64 {
    let root_n = (n as f64).sqrt();
    let a = (n - 1) as f64 / 2.0;
    let scale = (2.0 * a / PI).sqrt() * (-stirling_error(a)).exp();
    // A chi variable over the root of its degrees of freedom, on a logarithmic axis.
    let density = |u: f64| scale * (-a * (f64::exp_m1(2.0 * u) - 2.0 * u)).exp();
    let step = 0.25 * f64::min(1.0 / (4.0 * a).sqrt(), 1.0 / (root_n * z.abs().max(1.0)));
    let term = |u: f64| density(u) * normal_at_most(root_n * (k * u.exp() - z));
    let half = |sign: f64| {
        let places = (1_u32..).map(|j| sign * f64::from(j) * step);
        places
            .take_while(|&u| density(u) > 1e-18 * scale)
            .map(term)
            .sum::<f64>()
    };
    step * (term(0.0) + half(1.0) + half(-1.0))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn share(value: f64) -> Share {
        Share::new(value).unwrap()
    }

    /// Printed tables, such as M. G. Natrella, "Experimental Statistics", NBS Handbook 91 (1963), table A-7, and ISO
    /// 16269-6 (both from memory; the outside check computes them anew with scipy). 95 % confidence.
    #[test]
    fn one_sided_factors_of_the_printed_tables() {
        for (n, coverage, k) in [
            (5, 0.90, 3.407),
            (10, 0.90, 2.355),
            (10, 0.95, 2.911),
            (10, 0.99, 3.981),
            (20, 0.95, 2.396),
            (30, 0.99, 3.064),
            (50, 0.95, 2.065),
        ] {
            let found = one_sided_factor(n, share(coverage), Share::P95).unwrap();
            assert!((found - k).abs() < 1e-3, "{n} {coverage}: {found}, not {k}");
        }
    }

    /// NIST/SEMATECH e-Handbook of Statistical Methods, 7.2.6.3: 43 wafers, coverage 90 %, confidence 99 %. It prints 2.2173
    /// two-sided by Howe's approximation; one-sided 1.8752 by another one and 1.8740 from the noncentral t (this one from
    /// memory).
    #[test]
    fn the_worked_example_of_the_handbook() {
        let two = two_sided_factor(43, share(0.90), share(0.99)).unwrap();
        let one = one_sided_factor(43, share(0.90), share(0.99)).unwrap();
        assert!((two / 2.2173 - 1.0).abs() < 0.01, "{two}");
        assert!((one - 1.8740).abs() < 5e-5, "{one}");
    }

    /// With two measurements there is a closed form at coverage 1/2: t of one degree of freedom is a Cauchy variable.
    #[test]
    fn the_smallest_sample_in_closed_form() {
        let confidence = 0.9;
        let wanted = (PI * (confidence - 0.5)).tan() / 2f64.sqrt();
        let found = one_sided_factor(2, share(0.5), share(confidence)).unwrap();
        assert!((found / wanted - 1.0).abs() < 1e-10, "{found} {wanted}");
        assert_eq!(one_sided_factor(1, share(0.5), Share::P95), None);
        assert_eq!(two_sided_factor(1, share(0.5), Share::P95), None);
    }

    #[test]
    fn many_measurements_need_no_more_than_the_quantile() {
        let one = one_sided_factor(1_000_000, share(0.999), Share::P95).unwrap();
        let two = two_sided_factor(1_000_000, share(0.95), Share::P95).unwrap();
        assert!((one - 3.090).abs() < 0.005, "{one}");
        assert!((two - 1.960).abs() < 0.005, "{two}");
    }
}
