//! Which step of a frame has just ended, told to whoever measures. Nobody does on the line, and then it costs nothing.

/// A step of the picture work.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Step {
    /// Some rows of the top-hat.
    TopHat,
    /// Threshold and run extraction of the same rows, or what the threshold needs the whole picture for.
    Threshold,
    /// Small holes closed.
    Fill,
    /// Regions with their moments.
    Regions,
    /// Pose, gauge and verdict of one part.
    Part,
}

/// Told of the end of each step.
pub trait Watch {
    /// `step` has ended. The time since the last call belongs to it.
    fn lap(&mut self, step: Step);
}

/// Nobody watches.
impl Watch for () {
    #[inline(always)]
    fn lap(&mut self, _: Step) {}
}
