//! How far the structuring elements reach.
//!
//! A rectangle is the sum (Minkowski) of a row and a column; an octagon adds two diagonals to them:
//! Serra, *Image Analysis and Mathematical Morphology*, 1982; Soille, *Morphological Image Analysis*, 2003, chapter 3.

use super::plan::Element;

/// A segment of pixels around its origin: `before + 1 + after` of them.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Span {
    /// Pixels towards the start of the row or column.
    pub before: usize,
    /// Pixels towards its end.
    pub after: usize,
}

impl Span {
    /// The segment of `size` pixels (at least 1) whose middle is the origin; an even one reaches further towards the start.
    pub fn new(size: usize) -> Self {
        let size = size.max(1);
        Self {
            before: size / 2,
            after: size - 1 - size / 2,
        }
    }

    /// Turned about its origin.
    pub fn reflected(self) -> Self {
        Self {
            before: self.after,
            after: self.before,
        }
    }

    /// How many pixels it has.
    pub fn size(self) -> usize {
        self.before + 1 + self.after
    }
}

/// The segments whose sum is the element.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Segments {
    /// Along the row.
    pub across: Span,
    /// Along the column.
    pub down: Span,
    /// Steps either way on both diagonals; 0 for a rectangle.
    pub diagonal: usize,
}

impl Segments {
    /// The decomposition of `element`.
    ///
    /// An octagon of radius `r` is the set `|x| <= r, |y| <= r, |x| + |y| <= r + h` with `h = r - 2 g`, where `g` is
    /// `(1 - 1/sqrt 2) r` rounded, but small enough that `h >= 1` (otherwise the two diagonals leave holes like a
    /// chessboard). It is the sum of a square of radius `h` and two diagonals of radius `g`. Up to 5 px it is the square.
    pub fn of(element: Element) -> Self {
        match element {
            Element::Rectangle {
                width_px,
                height_px,
            } => Self {
                across: Span::new(width_px),
                down: Span::new(height_px),
                diagonal: 0,
            },
            Element::Octagon { diameter_px } => {
                let radius = diameter_px.saturating_sub(1) / 2;
                let ideal = (radius as f64 * (1.0 - std::f64::consts::FRAC_1_SQRT_2)).round();
                let diagonal = (ideal as usize).min(radius.saturating_sub(1) / 2);
                let square = Span::new(2 * (radius - 2 * diagonal) + 1);
                Self {
                    across: square,
                    down: square,
                    diagonal,
                }
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// All pixels of the element as sums of one pixel from each segment.
    fn sum_of(segments: Segments) -> std::collections::BTreeSet<(isize, isize)> {
        let range = |s: Span| -(s.before as isize)..=s.after as isize;
        let diagonal = segments.diagonal as isize;
        let mut set = std::collections::BTreeSet::new();
        for x in range(segments.across) {
            for y in range(segments.down) {
                for d in -diagonal..=diagonal {
                    for e in -diagonal..=diagonal {
                        set.insert((x + d + e, y + d - e));
                    }
                }
            }
        }
        set
    }

    #[test]
    fn the_octagon_is_the_stated_set() {
        for radius in 0..=24isize {
            let segments = Segments::of(Element::Octagon {
                diameter_px: 2 * radius as usize + 1,
            });
            let side = segments.across.after as isize;
            assert_eq!(radius, side + 2 * segments.diagonal as isize);
            let mut stated = std::collections::BTreeSet::new();
            for x in -radius..=radius {
                for y in -radius..=radius {
                    if x.abs() + y.abs() <= radius + side {
                        stated.insert((x, y));
                    }
                }
            }
            assert_eq!(sum_of(segments), stated, "radius {radius}");
        }
    }

    #[test]
    fn a_large_octagon_is_nearly_regular() {
        let segments = Segments::of(Element::Octagon { diameter_px: 241 });
        let straight = 2.0 * segments.across.after as f64;
        let slanted = 2.0 * segments.diagonal as f64 * std::f64::consts::SQRT_2;
        assert!((straight / slanted - 1.0).abs() < 0.02);
    }

    #[test]
    fn an_even_segment_reaches_further_towards_the_start() {
        let four = Span::new(4);
        assert_eq!((four.before, four.after), (2, 1));
        assert_eq!(four.size(), 4);
        assert_eq!((four.reflected().before, four.reflected().after), (1, 2));
    }
}
