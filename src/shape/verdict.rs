//! Verdicts and the reasons for them.

use std::fmt;

use serde::Serialize;

/// What becomes of a part.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Verdict {
    /// It is good.
    Keep,
    /// It goes to the reject outlet.
    Reject,
}

impl fmt::Display for Verdict {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(match self {
            Self::Keep => "keep",
            Self::Reject => "reject",
        })
    }
}

/// Why a part is rejected.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[repr(u8)]
pub enum Reason {
    /// A bite deeper than the limit.
    Missing,
    /// A burr that sticks out farther than the limit.
    Excess,
    /// One of the further limits.
    Size,
    /// Never seen whole.
    Partial,
    /// Two parts grown together.
    Touching,
    /// Face down.
    Flipped,
    /// Fits no taught shape.
    Unknown,
    /// Belt that nobody saw in time.
    Unseen,
}

impl Reason {
    /// All of them, in the order in which they are listed.
    pub const ALL: [Self; 8] = [
        Self::Missing,
        Self::Excess,
        Self::Size,
        Self::Partial,
        Self::Touching,
        Self::Flipped,
        Self::Unknown,
        Self::Unseen,
    ];

    /// The word that stands in tables and files.
    pub fn name(self) -> &'static str {
        match self {
            Self::Missing => "missing",
            Self::Excess => "excess",
            Self::Size => "size",
            Self::Partial => "partial",
            Self::Touching => "touching",
            Self::Flipped => "flipped",
            Self::Unknown => "unknown",
            Self::Unseen => "unseen",
        }
    }
}

/// A set of reasons. Empty means there is nothing against the part.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Reasons(u8);

impl Reasons {
    /// Nothing against it.
    pub const NONE: Self = Self(0);

    /// The same set with `reason` in it.
    #[must_use]
    pub fn with(self, reason: Reason) -> Self {
        Self(self.0 | 1 << reason as u8)
    }

    /// Whether `reason` is in the set.
    pub fn has(self, reason: Reason) -> bool {
        self.0 & 1 << reason as u8 != 0
    }

    /// Whether there is nothing against the part.
    pub fn is_empty(self) -> bool {
        self.0 == 0
    }

    /// The reasons in their listed order.
    pub fn iter(self) -> impl Iterator<Item = Reason> {
        Reason::ALL
            .into_iter()
            .filter(move |&reason| self.has(reason))
    }
}

/// The words joined by `+`, as they stand in `parts.csv`.
impl fmt::Display for Reasons {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let words: Vec<_> = self.iter().map(Reason::name).collect();
        f.pad(&words.join("+"))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reasons_are_listed_in_order_whatever_came_first() {
        let reasons = Reasons::NONE
            .with(Reason::Unseen)
            .with(Reason::Missing)
            .with(Reason::Missing);
        assert_eq!(reasons.to_string(), "missing+unseen");
        assert!(reasons.has(Reason::Unseen) && !reasons.has(Reason::Size));
        assert!(Reasons::NONE.is_empty());
    }
}
