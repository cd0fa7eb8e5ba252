//! Frames to time without a recording.

use crate::frames::drawn::{Drawing, DrawnBelt, DrawnError, Scene};
use crate::frames::{Frame, FrameSource};
use crate::settings::{Settings, Tone};
use crate::units::Micros;

/// At most this many frames, and this many bytes of them, are kept.
const FRAMES: usize = 40;
const BYTES: usize = 64 << 20;

/// From frame to frame the belt moves by this share of the view.
const STEP: f64 = 0.3;

/// After this many views it is full of parts.
const FULL: f64 = 1.5;

/// More than ever come into view.
const PARTS: u64 = 1 << 30;

/// Frames of a belt full of parts, at least one, and what they show: whatever scene has parts of the right tone.
///
/// # Errors
/// Nothing can be drawn with these settings.
pub fn drawn_frames(settings: &Settings) -> Result<(Scene, Vec<Frame>), DrawnError> {
    let scene = match settings.picture.parts {
        Tone::Bright => Scene::OatStars,
        Tone::Dark => Scene::Gaskets,
    };
    let drawing = Drawing {
        scene,
        parts: PARTS,
        seed: 1,
        first_us: Micros::ZERO,
    };
    let view_mm = settings.view_mm();
    // Frames that follow each other as fast as the camera's would all show the same.
    let mut apart = settings.clone();
    apart.camera.frames_per_s = settings.belt.speed_mm_s / (STEP * view_mm);
    let mut belt = DrawnBelt::new(&drawing, &apart)?;
    let pixels = settings.camera.width_px as usize * settings.camera.height_px as usize;
    let wanted = (BYTES / pixels).clamp(1, FRAMES);
    let mut frames = Vec::with_capacity(wanted);
    let mut frame = Frame::default();
    while frames.len() < wanted {
        let Ok(more) = belt.next_into(&mut frame);
        assert!(more, "there are always more parts");
        if frame
            .belt_mm
            .is_some_and(|belt_mm| belt_mm >= FULL * view_mm)
        {
            frames.push(frame.clone());
        }
    }
    Ok((scene, frames))
}
