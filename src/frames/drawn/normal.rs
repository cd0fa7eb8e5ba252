//! The normal distribution: blurred edges and the sensor's noise.

/// The share of a standard normal distribution below `z` (Abramowitz & Stegun 1964, 26.2.17; error below 1e-7).
pub(super) fn share_below(z: f64) -> f64 {
    let t = 1.0 / (1.0 + 0.231_641_9 * z.abs());
    let factors = [
        1.330_274_429,
        -1.821_255_978,
        1.781_477_937,
        -0.356_563_782,
        0.319_381_530,
    ];
    let sum = factors.iter().fold(0.0, |sum, factor| (sum + factor) * t);
    let beyond = sum * (-z * z / 2.0).exp() / std::f64::consts::TAU.sqrt();
    if z > 0.0 { 1.0 - beyond } else { beyond }
}

/// Every twelve bits of chance a value of equal share: a standard normal distribution cut off at 3.7.
pub(super) fn quantiles() -> Vec<f32> {
    (0..QUANTILES)
        .map(|index| quantile((index as f64 + 0.5) / QUANTILES as f64) as f32)
        .collect()
}

/// How many there are: twelve bits.
pub(super) const QUANTILES: usize = 1 << 12;

fn quantile(share: f64) -> f64 {
    let (mut low, mut high) = (-5.0, 5.0);
    for _ in 0..40 {
        let middle = (low + high) / 2.0;
        *(if share_below(middle) < share {
            &mut low
        } else {
            &mut high
        }) = middle;
    }
    (low + high) / 2.0
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Values of `scipy.stats.norm.cdf`.
    #[test]
    fn shares_match_scipy() {
        for (z, want) in [
            (-3.0, 0.001_349_898_031_630_094_6),
            (-1.0, 0.158_655_253_931_457_05),
            (0.0, 0.5),
            (0.3, 0.617_911_422_188_952_7),
            (2.0, 0.977_249_868_051_820_8),
        ] {
            assert!((share_below(z) - want).abs() < 1e-7, "{z}");
        }
    }

    #[test]
    fn quantiles_have_no_mean_and_unit_spread() {
        let all = quantiles();
        let mean = |of: &dyn Fn(f64) -> f64| {
            all.iter().map(|&z| of(f64::from(z))).sum::<f64>() / all.len() as f64
        };
        assert!(mean(&|z| z).abs() < 1e-6);
        assert!((mean(&|z| z * z) - 1.0).abs() < 0.002);
    }
}
