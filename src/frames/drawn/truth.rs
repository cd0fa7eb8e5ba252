//! What is true of a drawn part, from its geometry alone.

use std::fmt;

/// What was meant to be drawn.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// Nothing wrong with it.
    Good,
    /// A bite well within the limit.
    SmallBite,
    /// A burr well within the limit.
    SmallBurr,
    /// A bite 0.3 mm within the limit.
    NearBiteWithin,
    /// A bite 0.3 mm over the limit.
    NearBiteOver,
    /// A burr 0.3 mm within the limit.
    NearBurrWithin,
    /// A burr 0.3 mm over the limit.
    NearBurrOver,
    /// A bite clearly over the limit.
    Bite,
    /// A burr clearly over the limit.
    Burr,
    /// A tip that has broken off.
    BrokenTip,
    /// A good part that lies face down.
    Flipped,
    /// Two good parts grown together.
    Touching,
    /// A good part that leaves the picture at the top or the bottom.
    AtEdge,
}

impl Kind {
    /// The words that stand in tables.
    pub fn name(self) -> &'static str {
        match self {
            Self::Good => "good",
            Self::SmallBite => "small bite",
            Self::SmallBurr => "small burr",
            Self::NearBiteWithin => "bite 0.3 mm within",
            Self::NearBiteOver => "bite 0.3 mm over",
            Self::NearBurrWithin => "burr 0.3 mm within",
            Self::NearBurrOver => "burr 0.3 mm over",
            Self::Bite => "bite",
            Self::Burr => "burr",
            Self::BrokenTip => "broken tip",
            Self::Flipped => "flipped",
            Self::Touching => "touching",
            Self::AtEdge => "across the edge",
        }
    }
}

/// What speaks against a part. Nothing means that it is kept.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Against {
    /// The deepest bite is over the limit.
    pub missing: bool,
    /// The farthest burr is over the limit.
    pub excess: bool,
    /// It leaves the picture at the top or the bottom, and such parts are not kept.
    pub partial: bool,
    /// It touches another part.
    pub touching: bool,
    /// It lies face down, and such parts are rejected.
    pub flipped: bool,
}

impl Against {
    /// Whether the part is to be rejected.
    pub fn any(self) -> bool {
        self != Self::default()
    }
}

/// The words of `parts.csv`, joined by `+`.
impl fmt::Display for Against {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let words = [
            (self.missing, "missing"),
            (self.excess, "excess"),
            (self.partial, "partial"),
            (self.touching, "touching"),
            (self.flipped, "flipped"),
        ];
        let words: Vec<_> = words
            .iter()
            .filter(|(is, _)| *is)
            .map(|(_, word)| *word)
            .collect();
        f.pad(&words.join("+"))
    }
}

/// A drawn part. All of it follows from the geometry that was drawn; nothing was measured in a picture.
#[derive(Clone, Debug, PartialEq)]
pub struct Truth {
    /// Counted from 0 in the order in which parts were laid on the belt.
    pub part: u64,
    /// What the camera sees as one thing: two touching parts share a number.
    pub thing: u64,
    /// Centroid of the nominal shape along the belt.
    pub along_mm: f64,
    /// Centroid of the nominal shape from the picture's top edge.
    pub across_mm: f64,
    /// Turned from the x axis towards the y axis of the picture (clockwise as it is looked at), 0 to 360.
    pub angle_deg: f64,
    /// Mirrored (x of the nominal shape negated) before it was turned.
    pub flipped: bool,
    /// What was meant.
    pub kind: Kind,
    /// Size over nominal size.
    pub scale: f64,
    /// The largest inside distance of the nominal shape over what is missing of it.
    pub missing_mm: f64,
    /// The largest distance to the nominal shape over what is too much.
    pub excess_mm: f64,
    /// What speaks against it.
    pub against: Against,
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reasons_are_joined() {
        let mut against = Against::default();
        assert!(!against.any());
        assert_eq!(against.to_string(), "");
        against.flipped = true;
        against.excess = true;
        assert!(against.any());
        assert_eq!(against.to_string(), "excess+flipped");
    }
}
