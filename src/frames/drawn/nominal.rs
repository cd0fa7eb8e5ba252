//! The two shapes as they should be.

use std::f64::consts::{FRAC_PI_2, PI, TAU};

use super::outline::{Outline, Piece};
use super::plane::Point;
use super::search::{Square, highest};

/// A shape as it should be, its centroid at the origin.
#[derive(Debug)]
pub(super) struct Nominal {
    pub outline: Outline,
    /// Everything lies within this distance from the centroid.
    pub radius_mm: f64,
    /// The largest inside distance: no bite is deeper.
    pub deepest_mm: f64,
    /// Where a piece breaks off along a straight line, as a share of the outline: the tips of a star.
    pub tips: Vec<f64>,
}

impl Nominal {
    fn new(outline: Outline, tips: Vec<f64>) -> Self {
        let radius_mm = outline
            .chords(0.05)
            .map(|(from, _)| from.length())
            .fold(0.0, f64::max);
        let all = Square::around(radius_mm);
        let deepest_mm = highest(all, 0.0, |p| -outline.signed_mm(p), |_| -radius_mm);
        Self {
            outline,
            radius_mm,
            deepest_mm,
            tips,
        }
    }
}

/// Radius of the circle through a star's five tips: the farthest two are 38 mm apart (2 * 20 * sin 72).
const STAR_REACH_MM: f64 = 20.0;
const STAR_WAIST_MM: f64 = 11.0;
const STAR_TIP_RADIUS_MM: f64 = 2.5;
const STAR_VALLEY_RADIUS_MM: f64 = 3.0;
const STAR_TIPS: u32 = 5;

/// A five-pointed star with rounded tips and valleys; a tip lies on the x axis.
pub(super) fn star() -> Nominal {
    let half_rad = PI / f64::from(STAR_TIPS);
    let tip = Point::new(STAR_REACH_MM - STAR_TIP_RADIUS_MM, 0.0);
    let valley = Point::towards(half_rad) * (STAR_WAIST_MM + STAR_VALLEY_RADIUS_MM);
    // The flank touches both circles, one from each side: the inner tangent of two circles.
    let between = valley - tip;
    let lean = (STAR_TIP_RADIUS_MM + STAR_VALLEY_RADIUS_MM) / between.length();
    let across = between * (1.0 / between.length());
    let outward = across * lean - across.quarter() * (1.0 - lean * lean).sqrt();
    let outward_rad = outward.y_mm.atan2(outward.x_mm);

    let rounded_tip = Piece::arc(tip, STAR_TIP_RADIUS_MM, -outward_rad, 2.0 * outward_rad);
    let flank = Piece::line(
        tip + outward * STAR_TIP_RADIUS_MM,
        valley - outward * STAR_VALLEY_RADIUS_MM,
    );
    let turn_rad = 2.0 * (outward_rad - half_rad);
    let rounded_valley = Piece::arc(valley, STAR_VALLEY_RADIUS_MM, outward_rad + PI, -turn_rad);
    let mirror = |p: Point| {
        let line = Point::towards(half_rad);
        line * (2.0 * p.dot(line)) - p
    };
    let back = Piece::line(
        mirror(valley - outward * STAR_VALLEY_RADIUS_MM),
        mirror(tip + outward * STAR_TIP_RADIUS_MM),
    );
    let corner = [rounded_tip, flank, rounded_valley, back];
    let outline = Outline::repeated(&corner, corner[..3].to_vec(), STAR_TIPS);
    let half_tip = STAR_TIP_RADIUS_MM * outward_rad / outline.length_mm();
    let tips = (0..STAR_TIPS)
        .map(|tip| f64::from(tip) / f64::from(STAR_TIPS) + half_tip)
        .collect();
    Nominal::new(outline, tips)
}

const RING_RADIUS_MM: f64 = 17.5;
const BORE_RADIUS_MM: f64 = 8.0;
/// From the ring's centre to the bore's.
const BORE_OFFSET_MM: f64 = 2.2;
/// From the side to which the bore is moved round to the tab: neither 0 nor 180, so that the two together tell a
/// gasket from its mirror image.
const TAB_ANGLE_DEG: f64 = 100.0;
const TAB_HALF_WIDTH_MM: f64 = 4.5;
const TAB_REACH_MM: f64 = 22.5;
const TAB_CORNER_MM: f64 = 1.5;
const TAB_FILLET_MM: f64 = 2.0;

/// A ring with an off-centre bore and a tab.
pub(super) fn gasket() -> Nominal {
    let tab_rad = TAB_ANGLE_DEG.to_radians();
    let bore = Point::towards(-tab_rad) * BORE_OFFSET_MM;
    let mut pieces = ring_with_tab();
    pieces.push(Piece::arc(bore, BORE_RADIUS_MM, 0.0, -TAU));
    let outline = Outline::new(pieces).turned(tab_rad);
    let centroid = outline.centroid(0.01);
    Nominal::new(outline.moved(centroid * -1.0), Vec::new())
}

/// The outer curve, the tab along the x axis.
fn ring_with_tab() -> Vec<Piece> {
    let (half, corner, fillet) = (TAB_HALF_WIDTH_MM, TAB_CORNER_MM, TAB_FILLET_MM);
    let root_y = half + fillet;
    let root_x = ((RING_RADIUS_MM + fillet).powi(2) - root_y.powi(2)).sqrt();
    let root_rad = root_y.atan2(root_x);
    let corner_x = TAB_REACH_MM - corner;
    let fillet_rad = FRAC_PI_2 - root_rad;
    vec![
        Piece::arc(
            Point::ORIGIN,
            RING_RADIUS_MM,
            root_rad,
            TAU - 2.0 * root_rad,
        ),
        Piece::arc(
            Point::new(root_x, -root_y),
            fillet,
            PI - root_rad,
            -fillet_rad,
        ),
        Piece::line(Point::new(root_x, -half), Point::new(corner_x, -half)),
        Piece::arc(
            Point::new(corner_x, corner - half),
            corner,
            -FRAC_PI_2,
            FRAC_PI_2,
        ),
        Piece::line(
            Point::new(TAB_REACH_MM, corner - half),
            Point::new(TAB_REACH_MM, half - corner),
        ),
        Piece::arc(Point::new(corner_x, half - corner), corner, 0.0, FRAC_PI_2),
        Piece::line(Point::new(corner_x, half), Point::new(root_x, half)),
        Piece::arc(Point::new(root_x, root_y), fillet, -FRAC_PI_2, -fillet_rad),
    ]
}
