//! The pictures between the steps, for reports and checks.

use super::pipeline::Stage;
use crate::frames::Gray;

/// What the steps made of one picture; each picture has the planned size and no padding.
#[derive(Clone, Debug, PartialEq)]
pub struct Steps {
    /// The top-hat.
    pub top_hat: Vec<u8>,
    /// 255 where it is above the level, otherwise 0.
    pub binary: Vec<u8>,
    /// The same with small holes closed.
    pub filled: Vec<u8>,
    /// The level that was used (`low` for hysteresis).
    pub level: u8,
}

impl Stage {
    /// Runs all steps on `picture` and draws what lies between them. It allocates: not for the line.
    ///
    /// # Panics
    /// As [`Stage::run`] does.
    pub fn steps(&mut self, picture: Gray<'_>) -> Steps {
        self.run(picture);
        let pixels = picture.width_px * picture.height_px;
        let mut steps = Steps {
            top_hat: vec![0; pixels],
            binary: vec![0; pixels],
            filled: vec![0; pixels],
            level: self.scene.level,
        };
        self.top_hat.picture(picture, &mut steps.top_hat);
        self.raw.draw(&mut steps.binary);
        self.filled.draw(&mut steps.filled);
        steps
    }
}
