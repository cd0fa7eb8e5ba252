//! How a scene looks: reflectances, spots on parts, crumbs on the belt. Common practice, no source.

use super::belt::Part;
use super::body::Form;
use super::dice::{Dice, Stream};
use super::job::{APART_MM, Job, Scene};
use super::make::Made;
use super::plane::Point;

/// Reflectances (1 is white) and how much they vary.
#[derive(Clone, Copy, Debug)]
pub(super) struct Look {
    pub belt: f32,
    /// Share by which the belt's clouds, its weave and its worn stripes vary.
    pub belt_clouds: f32,
    pub belt_weave: f32,
    pub belt_stripes: f32,
    pub part: f32,
    /// Share by which the part's grain varies.
    pub grain: f32,
    /// Share by which a part is darker right at its rim.
    pub rim: f32,
    /// Share by which a rounded edge a little inside the rim is brighter.
    pub bevel: f32,
    pub pores: usize,
    pub glares: usize,
    pub glare: f32,
    pub crumbs: usize,
    /// Light in the middle of the picture over light in its corners.
    pub vignetting: f64,
    /// Gray values of noise in the dark.
    pub noise: f32,
}

impl Look {
    pub(super) fn of(scene: Scene) -> Self {
        match scene {
            Scene::OatStars => Self {
                belt: 0.12,
                belt_clouds: 0.10,
                belt_weave: 0.10,
                belt_stripes: 0.08,
                part: 0.72,
                grain: 0.07,
                rim: 0.14,
                bevel: 0.0,
                pores: 26,
                glares: 3,
                glare: 1.25,
                crumbs: 5,
                vignetting: 3.8,
                noise: 1.0,
            },
            Scene::Gaskets => Self {
                belt: 0.78,
                belt_clouds: 0.03,
                belt_weave: 0.02,
                belt_stripes: 0.03,
                part: 0.10,
                grain: 0.12,
                rim: 0.0,
                bevel: 0.7,
                pores: 0,
                glares: 3,
                glare: 0.95,
                crumbs: 4,
                vignetting: 3.8,
                noise: 1.0,
            },
        }
    }
}

/// A spot with a soft edge, in a part's own coordinates.
#[derive(Clone, Copy, Debug)]
pub(super) struct Spot {
    pub at: Point,
    /// Unit length, along its longer half axis.
    pub along: Point,
    pub long_mm: f64,
    pub wide_mm: f64,
    /// Reflectance in its middle, over what was there.
    pub level: f32,
    /// How much of what was there it hides.
    pub cover: f32,
}

/// The pores and glare spots of a part, all clear of its rim, so that its outline stays what was drawn.
pub(super) fn spots(look: &Look, job: &Job, made: &Made) -> Vec<Spot> {
    let mut dice = made.dice.clone();
    let pores = (0..look.pores)
        .filter_map(|_| pore(look, made, &mut dice))
        .collect::<Vec<_>>();
    let count = if look.glares == 0 {
        0
    } else {
        1 + dice.below(look.glares)
    };
    let glares = (0..count)
        .filter_map(|_| glare(look, job, made, &mut dice))
        .collect::<Vec<_>>();
    [pores, glares].concat()
}

fn pore(look: &Look, made: &Made, dice: &mut Dice) -> Option<Spot> {
    let radius_mm = dice.between(0.25, 0.75);
    Some(Spot {
        at: inside(made, radius_mm + 1.2, dice)?,
        along: Point::towards(dice.between(0.0, 3.0)),
        long_mm: radius_mm,
        wide_mm: radius_mm * dice.between(0.6, 1.0),
        level: look.part * 0.3,
        cover: dice.between(0.4, 0.8) as f32,
    })
}

/// A reflex, of at most 0.3 times the area that the settings have filled.
fn glare(look: &Look, job: &Job, made: &Made, dice: &mut Dice) -> Option<Spot> {
    let wide_mm = dice.between(0.6, 1.2);
    let largest_mm = 0.3 * job.glare_mm2 / (std::f64::consts::PI * wide_mm);
    let long_mm = (wide_mm * dice.between(1.0, 2.2)).min(largest_mm);
    let at = inside(made, long_mm.max(wide_mm) + 1.5, dice)?;
    (long_mm >= wide_mm * 0.8).then(|| Spot {
        at,
        // Along the nearest rim, as on a rounded edge.
        along: Point::towards(at.y_mm.atan2(at.x_mm)).quarter(),
        long_mm,
        wide_mm,
        level: look.glare,
        cover: 0.95,
    })
}

/// A random point at least `deep_mm` inside a part, if one turns up.
fn inside(made: &Made, deep_mm: f64, dice: &mut Dice) -> Option<Point> {
    let reach_mm = made.body.nominal.radius_mm;
    (0..30)
        .map(|_| {
            Point::new(
                dice.between(-reach_mm, reach_mm),
                dice.between(-reach_mm, reach_mm),
            )
        })
        .find(|&at| made.body.signed_mm(at) < -deep_mm)
}

/// A crumb on the belt.
#[derive(Clone, Copy, Debug)]
pub(super) struct Crumb {
    pub form: Form,
    pub centre: Point,
    pub radius_mm: f64,
    pub level: f32,
}

/// Crumbs come in stretches of belt this long.
pub(super) const STRETCH_MM: f64 = 50.0;

/// The crumbs on the stretch that begins at `index` times [`STRETCH_MM`], clear of all `parts` near it and each
/// smaller than half the area of what the settings call a crumb.
pub(super) fn crumbs<'a>(
    look: &Look,
    job: &Job,
    index: i64,
    parts: impl Iterator<Item = &'a Part> + Clone,
) -> Vec<Crumb> {
    let mut dice = Dice::new(job.drawing.seed, Stream::Crumbs(index));
    let largest_mm = (0.5 * job.speck_mm2 / 6.0).sqrt().min(0.9);
    let count = dice.below(look.crumbs + 1);
    let made = (0..count).map(|_| {
        let along_mm = (index as f64 + dice.between(0.0, 1.0)) * STRETCH_MM;
        let x_mm = super::belt::x_mm(job.travel, along_mm);
        let centre = Point::new(x_mm, dice.between(0.0, job.view_mm[1]));
        let radius_mm = dice.between(0.3, 1.0) * largest_mm;
        let half = Point::towards(dice.between(0.0, 3.2)) * (radius_mm * dice.between(0.05, 0.6));
        Crumb {
            form: Form::Stroke {
                from: centre - half,
                to: centre + half,
                radius_mm,
            },
            centre,
            radius_mm: 2.0 * radius_mm,
            level: look.part * dice.between(0.7, 1.0) as f32,
        }
    });
    let clear = |crumb: &Crumb| {
        let apart_mm = crumb.radius_mm + APART_MM;
        parts
            .clone()
            .all(|part| part.signed_mm(crumb.centre) > apart_mm)
    };
    made.collect::<Vec<_>>().into_iter().filter(clear).collect()
}
