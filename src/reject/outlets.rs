//! A set of outlets, small enough to be copied about.

/// At most this many outlets fit in a set, and so on a station.
pub const MAX_OUTLETS: usize = 64;

/// A set of outlets by their index in the settings: those that change, or those that are on.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash)]
pub struct Outlets(u64);

impl Outlets {
    /// No outlet.
    pub const NONE: Self = Self(0);

    /// Outlets 0 to `count` - 1; `count` is at most [`MAX_OUTLETS`].
    pub fn first(count: usize) -> Self {
        (0..count).fold(Self::NONE, Self::with)
    }

    /// One outlet.
    pub fn one(index: usize) -> Self {
        Self::NONE.with(index)
    }

    /// The same set with outlet `index`.
    #[must_use]
    pub fn with(self, index: usize) -> Self {
        Self(self.0 | 1 << index)
    }

    /// What is in either.
    #[must_use]
    pub fn and(self, other: Self) -> Self {
        Self(self.0 | other.0)
    }

    /// What is in both.
    #[must_use]
    pub fn within(self, other: Self) -> Self {
        Self(self.0 & other.0)
    }

    /// What is here and not in `other`.
    #[must_use]
    pub fn without(self, other: Self) -> Self {
        Self(self.0 & !other.0)
    }

    /// Whether outlet `index` is in the set.
    pub fn has(self, index: usize) -> bool {
        self.0 >> index & 1 != 0
    }

    /// Whether there is none.
    pub fn is_empty(self) -> bool {
        self.0 == 0
    }

    /// How many.
    pub fn count(self) -> u64 {
        u64::from(self.0.count_ones())
    }

    /// The indices, smallest first.
    pub fn iter(self) -> impl Iterator<Item = usize> {
        (0..MAX_OUTLETS).filter(move |&index| self.has(index))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sets_add_and_take_away() {
        let all = Outlets::first(MAX_OUTLETS);
        assert!(all.has(63) && all.without(all).is_empty());
        let two = Outlets::one(0).with(5);
        assert_eq!(two.iter().collect::<Vec<_>>(), [0, 5]);
        assert_eq!(two.without(Outlets::one(0)), Outlets::one(5));
        assert_eq!(
            two.and(Outlets::one(1))
                .within(Outlets::first(2))
                .iter()
                .count(),
            2
        );
    }
}
