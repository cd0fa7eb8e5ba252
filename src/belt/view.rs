//! One region of one frame, placed on the belt.

use crate::shape::Judged;
use crate::units::Micros;

/// An upright box on the belt. `lead_mm` is the edge that travels in front and so has the smaller `along_mm`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Extent {
    /// Leading edge.
    pub lead_mm: f64,
    /// Trailing edge.
    pub trail_mm: f64,
    /// Nearest to the picture's top edge.
    pub top_mm: f64,
    /// Farthest from it.
    pub bottom_mm: f64,
}

impl Extent {
    /// The smallest box around both.
    #[must_use]
    pub fn union(self, other: Self) -> Self {
        Self {
            lead_mm: self.lead_mm.min(other.lead_mm),
            trail_mm: self.trail_mm.max(other.trail_mm),
            top_mm: self.top_mm.min(other.top_mm),
            bottom_mm: self.bottom_mm.max(other.bottom_mm),
        }
    }

    /// Area of the box.
    pub fn area_mm2(self) -> f64 {
        (self.trail_mm - self.lead_mm) * (self.bottom_mm - self.top_mm)
    }

    /// Area that both boxes share.
    pub fn shared_mm2(self, other: Self) -> f64 {
        let along = self.trail_mm.min(other.trail_mm) - self.lead_mm.max(other.lead_mm);
        along.max(0.0) * self.shared_across_mm(other).max(0.0)
    }

    /// How far the two overlap across the belt; negative is the gap between them.
    pub fn shared_across_mm(self, other: Self) -> f64 {
        self.bottom_mm.min(other.bottom_mm) - self.top_mm.max(other.top_mm)
    }

    /// How far the two overlap along the belt; negative is the gap between them.
    pub fn shared_along_mm(self, other: Self) -> f64 {
        self.trail_mm.min(other.trail_mm) - self.lead_mm.max(other.lead_mm)
    }

    /// Distance from a point to the box; 0 inside.
    pub fn distance_mm(self, along_mm: f64, across_mm: f64) -> f64 {
        let along = (self.lead_mm - along_mm)
            .max(along_mm - self.trail_mm)
            .max(0.0);
        let across = (self.top_mm - across_mm)
            .max(across_mm - self.bottom_mm)
            .max(0.0);
        along.hypot(across)
    }
}

/// Which edges of the picture cut through a region.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Cut {
    /// It is still entering: its trailing edge is outside.
    pub upstream: bool,
    /// It is already leaving: its leading edge is outside.
    pub downstream: bool,
    /// It reaches over the side of the picture and will never be seen whole.
    pub side: bool,
}

impl Cut {
    /// Whether any edge cuts through it, so that this view is partial.
    pub fn any(self) -> bool {
        self.upstream || self.downstream || self.side
    }
}

/// One region of one frame, placed on the belt.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct View {
    /// When the frame was captured.
    pub captured_us: Micros,
    /// Its box.
    pub extent: Extent,
    /// Its centroid along the belt.
    pub along_mm: f64,
    /// Its centroid across the belt.
    pub across_mm: f64,
    /// Area of what is seen of it.
    pub area_mm2: f64,
    /// The picture's edges that cut through it.
    pub cut: Cut,
    /// The verdict on it; a cut region has none.
    pub judged: Option<Judged>,
}

impl View {
    /// How far this view is from `other` as views of one part; infinite if they can't be.
    ///
    /// Whole views compare centroids. A cut view has lost at least one edge, so only edges that both really show are
    /// compared; where there is none in common, lying over each other must do.
    pub fn distance_mm(&self, other: &Self) -> f64 {
        if !self.cut.any() && !other.cut.any() {
            return (self.along_mm - other.along_mm).hypot(self.across_mm - other.across_mm);
        }
        if self.extent.shared_across_mm(other.extent) <= 0.0 {
            return f64::INFINITY;
        }
        let lead = !(self.cut.downstream || other.cut.downstream);
        let trail = !(self.cut.upstream || other.cut.upstream);
        let lead_mm = (self.extent.lead_mm - other.extent.lead_mm).abs();
        let trail_mm = (self.extent.trail_mm - other.extent.trail_mm).abs();
        match (lead, trail) {
            (true, true) => lead_mm.max(trail_mm),
            (true, false) => lead_mm,
            (false, true) => trail_mm,
            (false, false) if self.extent.shared_along_mm(other.extent) > 0.0 => 0.0,
            (false, false) => f64::INFINITY,
        }
    }
}
