//! The same part in two replays of one recording.

use crate::belt::Part;

/// A part of each replay, or of one of them where the other has none.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Pair {
    /// Index in the first list.
    pub a: Option<usize>,
    /// Index in the second list.
    pub b: Option<usize>,
}

/// Matches parts whose centroids are at most `gate_mm` apart, nearest first, each at most once. The pairs come in the
/// order of the belt and hold every part of both lists once.
pub fn pair_parts(a: &[Part], b: &[Part], gate_mm: f64) -> Vec<Pair> {
    let mut near = candidates(a, b, gate_mm);
    near.sort_by(|x, y| x.0.total_cmp(&y.0).then((x.1, x.2).cmp(&(y.1, y.2))));
    let mut of_a = vec![None; a.len()];
    let mut taken = vec![false; b.len()];
    for (_, i, j) in near {
        if of_a[i].is_none() && !taken[j] {
            of_a[i] = Some(j);
            taken[j] = true;
        }
    }
    let both = of_a
        .into_iter()
        .enumerate()
        .map(|(i, b)| Pair { a: Some(i), b });
    let alone = (0..b.len()).filter(|&j| !taken[j]);
    let alone = alone.map(|j| Pair {
        a: None,
        b: Some(j),
    });
    let mut pairs: Vec<Pair> = both.chain(alone).collect();
    let along_mm = |pair: &Pair| {
        let part = pair.a.map(|i| &a[i]).or(pair.b.map(|j| &b[j]));
        part.map_or(f64::INFINITY, |part| part.along_mm)
    };
    pairs.sort_by(|x, y| along_mm(x).total_cmp(&along_mm(y)));
    pairs
}

fn candidates(a: &[Part], b: &[Part], gate_mm: f64) -> Vec<(f64, usize, usize)> {
    let mut order: Vec<usize> = (0..b.len()).collect();
    order.sort_by(|&x, &y| b[x].along_mm.total_cmp(&b[y].along_mm));
    let mut near = Vec::new();
    for (i, part) in a.iter().enumerate() {
        let first = order.partition_point(|&j| b[j].along_mm < part.along_mm - gate_mm);
        for &j in &order[first..] {
            let along_mm = b[j].along_mm - part.along_mm;
            if along_mm > gate_mm {
                break;
            }
            let apart_mm = along_mm.hypot(b[j].across_mm - part.across_mm);
            if apart_mm <= gate_mm {
                near.push((apart_mm, i, j));
            }
        }
    }
    near
}

#[cfg(test)]
pub(super) mod tests {
    use super::*;
    use crate::belt::Extent;
    use crate::shape::{Reasons, Verdict};
    use crate::units::Micros;

    /// A part of 40 mm that was never judged.
    pub(in crate::tuning) fn part(along_mm: f64, across_mm: f64) -> Part {
        Part {
            number: 1,
            along_mm,
            across_mm,
            area_mm2: 700.0,
            extent: Extent {
                lead_mm: along_mm - 20.0,
                trail_mm: along_mm + 20.0,
                top_mm: across_mm - 20.0,
                bottom_mm: across_mm + 20.0,
            },
            first_us: Micros(0),
            decided_us: Micros(0),
            views: 3,
            spoken_us: Micros(0),
            judged: None,
            verdict: Verdict::Keep,
            reasons: Reasons::NONE,
        }
    }

    #[test]
    fn the_nearest_go_together_and_nobody_is_lost() {
        let a = [part(100.0, 30.0), part(160.0, 30.0), part(400.0, 30.0)];
        let b = [
            part(161.0, 30.0),
            part(158.0, 31.0),
            part(99.0, 30.5),
            part(300.0, 30.0),
        ];
        let pair = |a, b| Pair { a, b };
        assert_eq!(
            pair_parts(&a, &b, 10.0),
            [
                pair(Some(0), Some(2)),
                pair(None, Some(1)),
                pair(Some(1), Some(0)),
                pair(None, Some(3)),
                pair(Some(2), None),
            ]
        );
    }
}
