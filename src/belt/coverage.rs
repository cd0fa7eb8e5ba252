//! Which belt was seen in time, and which was not.

use std::collections::VecDeque;

use crate::settings::DECISION_STEP_MM;

/// A stretch of belt.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Stretch {
    /// Its leading end.
    pub from_mm: f64,
    /// Its trailing end.
    pub to_mm: f64,
}

/// The belt covered by frames that were judged on time.
///
/// Frames come in the order of the belt, so all that has to be kept is how far the belt was seen and which gaps lie
/// before that. Belt ahead of the first frame does not count.
#[derive(Clone, Debug, Default)]
pub struct Coverage {
    /// Everything up to here was seen, is in `gaps`, or was taken as unseen already.
    settled_mm: Option<f64>,
    gaps: VecDeque<Stretch>,
    ended: bool,
}

impl Coverage {
    /// The belt counts from here on, whether a frame comes or not.
    pub fn begin(&mut self, at_mm: f64) {
        self.settled_mm.get_or_insert(at_mm);
    }

    /// A frame that was judged on time covers `seen`.
    pub fn cover(&mut self, seen: Stretch) {
        let settled_mm = *self.settled_mm.get_or_insert(seen.from_mm);
        if seen.from_mm > settled_mm {
            self.gaps.push_back(Stretch {
                from_mm: settled_mm,
                to_mm: seen.from_mm,
            });
        }
        self.settled_mm = Some(settled_mm.max(seen.to_mm));
    }

    /// Where the next piece of unseen belt begins, if nothing comes to cover it before it is decided.
    pub fn next_mm(&self) -> Option<f64> {
        let gap = self.gaps.front().map(|gap| gap.from_mm);
        gap.or(self.settled_mm.filter(|_| !self.ended))
    }

    /// Takes the piece that [`Coverage::next_mm`] told of, at most [`DECISION_STEP_MM`] long.
    pub fn take_unseen(&mut self) -> Option<Stretch> {
        let from_mm = self.next_mm()?;
        let mut to_mm = from_mm + DECISION_STEP_MM;
        match self.gaps.front_mut() {
            Some(gap) if gap.to_mm <= to_mm => {
                to_mm = gap.to_mm;
                self.gaps.pop_front();
            }
            Some(gap) => gap.from_mm = to_mm,
            None => self.settled_mm = Some(to_mm),
        }
        Some(Stretch { from_mm, to_mm })
    }

    /// The belt behind what was seen so far does not count.
    pub fn end(&mut self) {
        self.ended = true;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn stretch(from_mm: f64, to_mm: f64) -> Stretch {
        Stretch { from_mm, to_mm }
    }

    /// All that is unseen when every frame that shows belt up to `known_mm` has come.
    fn drain(coverage: &mut Coverage, known_mm: f64) -> Vec<Stretch> {
        let mut joined: Vec<Stretch> = Vec::new();
        while coverage
            .next_mm()
            .is_some_and(|from_mm| from_mm + DECISION_STEP_MM <= known_mm)
        {
            let piece = coverage.take_unseen().unwrap();
            match joined.last_mut() {
                Some(last) if last.to_mm == piece.from_mm => last.to_mm = piece.to_mm,
                _ => joined.push(piece),
            }
        }
        joined
    }

    #[test]
    fn overlapping_frames_leave_nothing_unseen() {
        let mut coverage = Coverage::default();
        for k in 0..10 {
            coverage.cover(stretch(f64::from(k) * 50.0, f64::from(k) * 50.0 + 160.0));
        }
        assert_eq!(drain(&mut coverage, 610.0), []);
    }

    #[test]
    fn a_gap_is_unseen_to_its_exact_ends() {
        let mut coverage = Coverage::default();
        coverage.cover(stretch(0.0, 160.0));
        coverage.cover(stretch(300.25, 460.25));
        assert_eq!(drain(&mut coverage, 159.0), []);
        assert_eq!(drain(&mut coverage, 460.25), [stretch(160.0, 300.25)]);
    }

    #[test]
    fn without_frames_unseen_belt_grows_in_whole_steps() {
        let mut coverage = Coverage::default();
        coverage.begin(100.0);
        assert_eq!(drain(&mut coverage, 104.5), [stretch(100.0, 104.0)]);
        coverage.cover(stretch(104.75, 200.0));
        assert_eq!(drain(&mut coverage, 200.5), [stretch(104.0, 104.75)]);
    }
}
