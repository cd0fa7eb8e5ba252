//! Limits and sizes proposed from what good parts look like, each with its reason.

use crate::frames::Gray;
use crate::shape::Measurer;
use crate::stage::{Again, Level, OtsuLevels, Plan, Threshold, TopHat};
use crate::stats::{Share, fewest_for_order_limit, one_sided_factor, order_limit};

/// A proposed value with its reason in one line.
#[derive(Clone, Debug, PartialEq)]
pub struct Proposed {
    /// The value.
    pub value: f64,
    /// Why.
    pub why: String,
}

/// A limit that `coverage` of all good parts stays below, with `confidence`, from the figures of some; `None` of fewer than
/// two.
///
/// With enough parts it is one of the largest figures, whatever their distribution (S. S. Wilks 1941). With fewer it is mean +
/// k s of a normal distribution (one-sided tolerance limit, G. J. Hahn and W. Q. Meeker 1991), but never below the largest.
/// Figures are never negative and their larger ones are rarer than a normal distribution has them, or not: so the reason
/// says which it was.
pub fn limit(figures: &[f64], coverage: Share, confidence: Share) -> Option<Proposed> {
    let n = figures.len();
    let mut sorted = figures.to_vec();
    sorted.sort_by(|a, b| b.total_cmp(a));
    let stated = format!("{coverage} % of good parts, {confidence} % confidence, {n} parts");
    if let Some(place) = order_limit(n as u64, coverage, confidence) {
        let value = sorted[place as usize - 1];
        return Some(Proposed {
            value,
            why: format!(
                "{stated}: number {place} of the largest, whatever the distribution (Wilks 1941)"
            ),
        });
    }
    let k = one_sided_factor(n as u64, coverage, confidence)?;
    let mean = figures.iter().sum::<f64>() / n as f64;
    let squares: f64 = figures.iter().map(|figure| (figure - mean).powi(2)).sum();
    let s = (squares / (n as f64 - 1.0)).sqrt();
    let normal = mean + k * s;
    let needed = fewest_for_order_limit(1, coverage, confidence);
    let why = format!(
        "{stated}: mean {mean:.2} + {k:.2} x {s:.2} mm, normal distribution assumed (Hahn and Meeker 1991; {needed} parts would \
         need no assumption)"
    );
    Some(Proposed {
        value: normal.max(sorted[0]),
        why: if normal < sorted[0] {
            format!("{why}; the largest figure is above that")
        } else {
            why
        },
    })
}

/// What pictures say of the threshold: counts of top-hat values, summed up over frames.
pub struct GrayLevels {
    hat: TopHat,
    values: Vec<u8>,
    counts: [u64; 256],
}

impl GrayLevels {
    /// Nothing counted yet; `plan` is of the size and element that will be used.
    pub fn new(plan: &Plan, level: Level) -> Self {
        Self {
            hat: TopHat::new(plan, level),
            values: vec![0; plan.width_px * plan.height_px],
            counts: [0; 256],
        }
    }

    /// Counts a picture of the planned size; its top-hat is given back.
    pub fn add(&mut self, picture: Gray<'_>) -> &[u8] {
        self.hat.picture(picture, &mut self.values);
        self.values
            .iter()
            .for_each(|&value| self.counts[usize::from(value)] += 1);
        &self.values
    }

    /// Half way up the edge of a rather dim part: there an edge is where it looks to be, however blurred.
    pub fn threshold(&self) -> Option<Proposed> {
        let split = usize::from(crate::stage::otsu_level(&self.counts));
        let belt = quantile(&self.counts, 0..split + 1, 0.5)?;
        let parts = quantile(&self.counts, split + 1..256, 0.1)?;
        Some(Proposed {
            value: ((belt + parts) / 2) as f64,
            why: format!(
                "after the top-hat half of the belt is at most {belt}, and nine tenths of the parts at least {parts} (two classes \
                 after Otsu 1979); half way up the edge of a dim part"
            ),
        })
    }
}

/// The value that this share of the counts in `range` does not exceed.
fn quantile(counts: &[u64; 256], range: std::ops::Range<usize>, share: f64) -> Option<usize> {
    let total: u64 = counts[range.clone()].iter().sum();
    let mut below = 0;
    range.into_iter().find(|&value| {
        below += counts[value];
        total > 0 && below as f64 >= share * total as f64
    })
}

/// Finds the size up to which holes must be closed for parts to have no more holes than the taught shape.
pub struct Holes {
    again: Again,
    otsu: OtsuLevels,
    measurer: Measurer,
    sizes_px: Vec<u64>,
    /// For each size: parts with no more holes than the shape, and parts.
    counted: Vec<(usize, usize)>,
}

impl Holes {
    /// Sizes to be tried, in pixels, rising.
    pub fn new(plan: &Plan, level: Level, sizes_px: Vec<u64>) -> Self {
        Self {
            again: Again::new(plan, level),
            otsu: OtsuLevels::default(),
            measurer: Measurer::default(),
            counted: vec![(0, 0); sizes_px.len()],
            sizes_px,
        }
    }

    /// Looks at one top-hat; regions with less than `least_px` or at the picture's edge are left out.
    pub fn add(
        &mut self,
        hat: &[u8],
        plan: &Plan,
        threshold: Threshold,
        bores: u32,
        least_px: u64,
    ) {
        let threshold = threshold.at(self.otsu.of(hat));
        for (size, counted) in self.sizes_px.iter().zip(&mut self.counted) {
            let scene = self.again.run(hat, threshold, *size, least_px.max(1));
            for region in &scene.regions {
                let inside = region.x_min > 0
                    && region.y_min > 0
                    && (region.x_max as usize) < plan.width_px
                    && (region.y_max as usize) < plan.height_px;
                if inside {
                    let runs = &scene.runs[region.runs.clone()];
                    counted.0 += usize::from(self.measurer.holes(region, runs) <= bores);
                    counted.1 += 1;
                }
            }
        }
    }

    /// The smallest size that leaves at most one part in a hundred with holes of its own, and how many parts that says.
    pub fn smallest(&self) -> Option<(u64, usize)> {
        let enough = |counted: &(usize, usize)| counted.1 > 0 && 100 * counted.0 >= 99 * counted.1;
        let found = self.counted.iter().position(enough)?;
        Some((self.sizes_px[found], self.counted[found].1))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn share(value: f64) -> Share {
        Share::new(value).unwrap()
    }

    #[test]
    fn few_parts_need_an_assumption_and_many_do_not() {
        let figures: Vec<f64> = (0..20).map(|k| f64::from(k) / 10.0).collect();
        // k of Hahn and Meeker for n = 20, 0.99, 0.95 is 3.295 (their table A.12d); mean 0.95, s = 0.59161.
        let few = limit(&figures, share(0.99), share(0.95)).unwrap();
        assert!(
            (few.value - (0.95 + 3.295 * 0.591_61)).abs() < 1e-3,
            "{few:?}"
        );
        assert!(
            few.why.contains("normal") && few.why.contains("299 parts"),
            "{few:?}"
        );
        let figures: Vec<f64> = (0..299).map(f64::from).collect();
        let many = limit(&figures, share(0.99), share(0.95)).unwrap();
        assert_eq!(many.value, 298.0);
        assert!(many.why.contains("Wilks"));
        assert_eq!(limit(&[1.0], share(0.99), share(0.95)), None);
    }

    #[test]
    fn a_normal_limit_is_never_below_a_good_part() {
        let figures = [0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 10.0];
        // One stray among ten: mean 1, s 3.16, and k about 1.8, so mean + k s is about 7.
        let limit = limit(&figures, share(0.96), share(0.5)).unwrap();
        assert_eq!(limit.value, 10.0, "{limit:?}");
    }

    #[test]
    fn quantiles_count_what_is_in_their_range() {
        let mut counts = [0; 256];
        counts[3] = 90;
        counts[9] = 10;
        counts[200] = 50;
        assert_eq!(quantile(&counts, 0..100, 0.9), Some(3));
        assert_eq!(quantile(&counts, 0..100, 0.91), Some(9));
        assert_eq!(quantile(&counts, 100..256, 0.05), Some(200));
        assert_eq!(quantile(&counts, 210..256, 0.05), None);
    }
}
