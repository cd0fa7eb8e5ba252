//! The best few of many places.

use super::align::Place;

/// The `N` places with the lowest costs, lowest first; of equal costs the one that came first.
#[derive(Clone, Debug)]
pub(super) struct Shortlist<const N: usize> {
    places: [(f64, Place); N],
    len: usize,
}

impl<const N: usize> Default for Shortlist<N> {
    fn default() -> Self {
        Self {
            places: [(0.0, Place::default()); N],
            len: 0,
        }
    }
}

impl<const N: usize> Shortlist<N> {
    pub(super) fn clear(&mut self) {
        self.len = 0;
    }

    pub(super) fn as_slice(&self) -> &[(f64, Place)] {
        &self.places[..self.len]
    }

    /// At most the first `count`.
    pub(super) fn first(&self, count: usize) -> &[(f64, Place)] {
        &self.as_slice()[..count.min(self.len)]
    }

    /// All but the first `count`.
    pub(super) fn after(&self, count: usize) -> &[(f64, Place)] {
        &self.as_slice()[count.min(self.len)..]
    }

    pub(super) fn offer(&mut self, cost: f64, place: Place) {
        let at = self.as_slice().partition_point(|&(other, _)| other <= cost);
        if at == N {
            return;
        }
        self.len = (self.len + 1).min(N);
        self.places[at..self.len].rotate_right(1);
        self.places[at] = (cost, place);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_lowest_stay_and_the_first_of_equals_is_first() {
        let mut list = Shortlist::<3>::default();
        for (i, cost) in [5.0, 2.0, 9.0, 2.0, 1.0, 7.0].into_iter().enumerate() {
            let place = Place {
                x: i as f64,
                ..Place::default()
            };
            list.offer(cost, place);
        }
        let kept: Vec<_> = list
            .as_slice()
            .iter()
            .map(|(cost, place)| (*cost, place.x))
            .collect();
        assert_eq!(kept, [(1.0, 4.0), (2.0, 1.0), (2.0, 3.0)]);
        assert_eq!(
            (
                list.first(2).len(),
                list.after(2).len(),
                list.first(9).len(),
                list.after(9).len()
            ),
            (2, 1, 3, 0)
        );
    }
}
