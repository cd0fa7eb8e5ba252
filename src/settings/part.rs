//! What can only be checked once the size of a part is known: its taught shape lies in a file of its own.

use super::between::{Finding, Findings, n, up};
use super::fields::{Outlet, Settings};

/// What a taught shape says about the size of a part.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PartSize {
    /// Longest extent (maximum Feret diameter).
    pub longest_mm: f64,
    /// Narrowest extent (minimum Feret diameter).
    pub narrowest_mm: f64,
    /// Width of the largest element of the set kind that fits inside at any angle, holes that are filled taken as filled.
    pub inside_mm: f64,
    /// Area without its holes.
    pub area_mm2: f64,
    /// Its smallest real hole, if it has one.
    pub smallest_hole_mm2: Option<f64>,
}

/// Everything that the settings get wrong about a part of that size.
pub(super) fn against(settings: &Settings, shape: usize, size: &PartSize) -> Vec<Finding> {
    let mut part = Part {
        settings,
        name: settings.shapes[shape].name.escape_debug().to_string(),
        size,
        found: Findings::default(),
    };
    part.element();
    part.areas();
    part.view();
    part.whole_views();
    for (index, outlet) in settings.outlets.iter().enumerate() {
        part.neighbour(outlet, format!("outlet[{index}].margin_mm"));
        part.longest_on(outlet, format!("outlet[{index}].max_on_ms"));
        part.shortest_on(outlet, format!("outlet[{index}].close_delay_ms"));
    }
    part.found.0
}

struct Part<'a> {
    settings: &'a Settings,
    name: String,
    size: &'a PartSize,
    found: Findings,
}

impl Part<'_> {
    fn element(&mut self) {
        let scale = self.settings.scale();
        let element_mm = scale.mm(self.settings.element_px() as f64);
        if element_mm <= self.size.inside_mm {
            // Two pixels more, so that rounding to an odd number cannot undo it.
            let expected = format!("at least {} mm", up(self.size.inside_mm + scale.mm(2.0)));
            let why = format!(
                "an element of {} mm fits inside a part of shape \"{}\", whose widest inside is {} mm, and the top-hat \
                 would remove the part",
                n(element_mm),
                self.name,
                n(self.size.inside_mm),
            );
            self.found.add("picture.element_mm", &expected, &why);
        }
    }

    fn areas(&mut self) {
        let part_mm2 = self.size.area_mm2;
        if self.settings.picture.speck_below_mm2 > part_mm2 {
            let why = format!(
                "a part of shape \"{}\" would be dropped as a crumb",
                self.name
            );
            let expected = format!("at most {} mm2", n(part_mm2));
            self.found.add("picture.speck_below_mm2", &expected, &why);
        }
        if let Some(hole_mm2) = self.size.smallest_hole_mm2
            && self.settings.picture.fill_below_mm2 >= hole_mm2
        {
            let why = format!("a hole of shape \"{}\" would be filled", self.name);
            let expected = format!("less than {} mm2", n(hole_mm2));
            self.found.add("picture.fill_below_mm2", &expected, &why);
        }
    }

    fn view(&mut self) {
        let region = self.settings.region_px();
        let key = match self.settings.picture.region_mm {
            Some(_) => "picture.region_mm",
            None => "camera.mm_per_px",
        };
        for (px, side) in [(region.width_px, "long"), (region.height_px, "wide")] {
            let side_mm = self.settings.scale().mm(px as f64);
            if self.size.longest_mm >= side_mm {
                let expected = format!("a view more than {} mm {side}", n(self.size.longest_mm));
                let why = format!(
                    "a part of shape \"{}\" can be that long, and does not fit in a view of {} mm",
                    self.name,
                    n(side_mm)
                );
                self.found.add(key, &expected, &why);
            }
        }
    }

    fn whole_views(&mut self) {
        let fastest_mm_s = self.settings.fastest_mm_s();
        let step_mm = fastest_mm_s / self.settings.camera.frames_per_s;
        let spare_mm = self.settings.region_length_mm() - self.size.longest_mm;
        if spare_mm > 0.0 && step_mm > spare_mm {
            let expected = format!("at least {} frames/s", up(fastest_mm_s / spare_mm));
            let why = format!(
                "a part of shape \"{}\" ({} mm) lies whole in view for {} mm, but the belt moves up to {} mm from frame \
                 to frame, so that some parts would never be seen whole",
                self.name,
                n(self.size.longest_mm),
                n(spare_mm),
                n(step_mm),
            );
            self.found.add("camera.frames_per_s", &expected, &why);
        }
    }

    fn neighbour(&mut self, outlet: &Outlet, key: String) {
        let pitch_mm = self.settings.belt.part_pitch_mm;
        let gap_mm = pitch_mm - self.size.narrowest_mm;
        if outlet.margin_mm >= gap_mm {
            let why = format!(
                "parts of shape \"{}\" are at least {} mm long and follow each other every {} mm, so that rejecting one \
                 would take its neighbours",
                self.name,
                n(self.size.narrowest_mm),
                n(pitch_mm),
            );
            self.found
                .add(key, &format!("less than {} mm", n(gap_mm)), &why);
        }
    }

    fn longest_on(&mut self, outlet: &Outlet, key: String) {
        let on_ms = self.settings.on_ms(outlet, self.size.longest_mm);
        if on_ms > outlet.max_on_ms {
            let why = format!(
                "a part of shape \"{}\" ({} mm) and two margins of {} mm hold it open for that long",
                self.name,
                n(self.size.longest_mm),
                n(outlet.margin_mm),
            );
            self.found
                .add(key, &format!("at least {} ms", up(on_ms)), &why);
        }
    }

    fn shortest_on(&mut self, outlet: &Outlet, key: String) {
        let on_ms = self.settings.on_ms(outlet, self.size.narrowest_mm);
        if on_ms <= 0.0 {
            let expected = format!(
                "less than {} ms, or larger margins",
                n(outlet.close_delay_ms + on_ms)
            );
            let why = format!(
                "for a part of shape \"{}\" ({} mm) the signal to close would leave before the one to open",
                self.name,
                n(self.size.narrowest_mm),
            );
            self.found.add(key, &expected, &why);
        }
    }
}
