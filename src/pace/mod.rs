//! Can this PC keep up? The picture work, timed step by step on many frames, held against latency and frame rate.
//!
//! One thread, as on the line, where a frame must be done before the next one comes. Decoding is timed but does not
//! belong to the frame: a camera's frames need none.

mod cost;
mod drawn;
mod tally;

pub use cost::{Change, Saving, changes, savings};
pub use drawn::drawn_frames;
pub use tally::{Spread, Tally};

use crate::frames::Frame;
use crate::inspect::{Inspector, Look};
use crate::settings::Settings;

/// Frames that are looked at first and not counted: memory is touched for the first time there.
const WARM_UP: usize = 10;

/// Times `inspector` on `frames` frames; `read` fills in frame `k` for any `k`.
///
/// # Errors
/// The first of `read`.
pub fn time<E>(
    mut inspector: Inspector,
    frames: usize,
    mut read: impl FnMut(usize, &mut Frame) -> Result<(), E>,
) -> Result<Tally, E> {
    let (mut frame, mut look) = (Frame::default(), Look::default());
    for k in 0..WARM_UP.min(frames) {
        read(k, &mut frame)?;
        inspector.inspect(&frame, &mut look);
    }
    let mut tally = Tally::for_frames(frames);
    for k in 0..frames {
        tally.read(|| read(k, &mut frame))?;
        tally.inspect(&mut inspector, &frame, &mut look);
    }
    Ok(tally)
}

/// How the time for a frame compares with what the settings ask for.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Headroom {
    /// 99 of 100 frames take no longer.
    pub frame_ms: f64,
    /// By then a frame's verdicts must be there.
    pub latency_ms: f64,
    /// Then the next frame comes.
    pub interval_ms: f64,
}

impl Headroom {
    /// For frames that take as long as `whole` says.
    pub fn of(settings: &Settings, whole: &Spread) -> Self {
        Self {
            frame_ms: whole.p99_ms,
            latency_ms: settings.camera.latency_ms,
            interval_ms: 1e3 / settings.camera.frames_per_s,
        }
    }

    /// Whether verdicts are there by the time they take effect.
    pub fn within_latency(&self) -> bool {
        self.frame_ms <= self.latency_ms
    }

    /// Whether a frame is done when the next one comes.
    pub fn within_interval(&self) -> bool {
        self.frame_ms <= self.interval_ms
    }

    /// Both.
    pub fn keeps_up(&self) -> bool {
        self.within_latency() && self.within_interval()
    }

    /// The highest frame rate with the set latency; 0 if the latency is too short for any.
    pub fn highest_frames_per_s(&self) -> f64 {
        if self.within_latency() {
            1e3 / self.frame_ms
        } else {
            0.0
        }
    }

    /// How many times the set rate that is.
    pub fn margin(&self) -> f64 {
        self.highest_frames_per_s() * self.interval_ms / 1e3
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn both_latency_and_interval_must_hold() {
        let headroom = |frame_ms, latency_ms, interval_ms| Headroom {
            frame_ms,
            latency_ms,
            interval_ms,
        };
        let good = headroom(5.0, 50.0, 20.0);
        assert!(good.keeps_up());
        assert_eq!((good.highest_frames_per_s(), good.margin()), (200.0, 4.0));
        // The next frame comes too early, but the latency would do for a slower camera.
        let slow = headroom(25.0, 50.0, 20.0);
        assert!(!slow.keeps_up() && slow.within_latency());
        assert_eq!((slow.highest_frames_per_s(), slow.margin()), (40.0, 0.8));
        // Verdicts come too late, whatever the rate.
        let late = headroom(60.0, 50.0, 200.0);
        assert!(!late.keeps_up() && late.within_interval());
        assert_eq!((late.highest_frames_per_s(), late.margin()), (0.0, 0.0));
    }
}
