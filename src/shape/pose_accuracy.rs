//! How near poses come to those at which parts were drawn: random places, angles, faces and flaws.

use rand::{Rng, RngExt, SeedableRng};
use rand_pcg::Pcg64Mcg;

use super::drawn::{self, Flaw, Outline};
use super::overlay::Overlay;
use super::pose::{Finder, Found};
use super::{Bitmap, Model, Pose};

struct Taught {
    outline: Outline,
    model: Model,
    /// From the silhouette's (0, 0) to the outline's.
    centre: (f64, f64),
    finder: Finder,
    overlay: Overlay,
}

/// Distances between a found pose and the true one.
#[derive(Clone, Copy, Debug)]
struct Miss {
    middle_px: f64,
    /// By the angle alone, at the outermost pixel.
    rim_px: f64,
    face: bool,
}

impl Taught {
    fn new(outline: Outline) -> Self {
        let (silhouette, centre) = drawn::silhouette(&outline, 0.25);
        Self {
            outline,
            model: Model::new(silhouette),
            centre,
            finder: Finder::default(),
            overlay: Overlay::default(),
        }
    }

    fn find(&mut self, picture: &Bitmap) -> Found {
        let (region, runs) = picture.to_region().unwrap();
        self.finder
            .find(&region, &runs, &self.model, &mut self.overlay)
    }

    fn miss(&self, found: Pose, drawn: Pose) -> Miss {
        let (sin, cos) = drawn.angle_deg.to_radians().sin_cos();
        let centroid = self.model.centroid;
        let side = if drawn.flipped { -1.0 } else { 1.0 };
        let (u, v) = (
            side * (centroid.0 - self.centre.0),
            centroid.1 - self.centre.1,
        );
        let x = drawn.x_px + cos * u - sin * v;
        let y = drawn.y_px + sin * u + cos * v;
        let symmetry = self.model.symmetry();
        let span = symmetry.span_deg();
        let turn = if span > 0.0 {
            (found.angle_deg - drawn.angle_deg).rem_euclid(span)
        } else {
            0.0
        };
        Miss {
            middle_px: (found.x_px - x).hypot(found.y_px - y),
            rim_px: turn.min(span - turn).to_radians() * self.model.radius_px,
            face: !symmetry.mirror && found.flipped != drawn.flipped,
        }
    }

    /// Draws and finds many parts with the flaws that `flaws` thinks up.
    fn misses(&mut self, flaws: impl Fn(&mut Pcg64Mcg) -> Vec<Flaw>) -> Vec<Miss> {
        let mut misses = Vec::new();
        for seed in 0..count() {
            let mut random = Pcg64Mcg::seed_from_u64(seed);
            let flipped = !self.model.symmetry().mirror && random.random_bool(0.5);
            let pose = random_pose(&mut random, flipped);
            let picture = self.outline.draw(pose, &flaws(&mut random), (260, 260));
            let found = self.find(&picture);
            misses.push(self.miss(found.pose, pose));
        }
        misses
    }
}

fn random_pose(random: &mut impl Rng, flipped: bool) -> Pose {
    let mut place = || 130.0 + random.random_range(-20.0..20.0);
    let (x_px, y_px) = (place(), place());
    Pose {
        x_px,
        y_px,
        angle_deg: random.random_range(0.0..360.0),
        flipped,
    }
}

/// The spread of misses, in px.
#[derive(Debug)]
struct Spread {
    middle: [f64; 4],
    rim: [f64; 4],
    wrong_faces: usize,
}

/// Prints and returns p50, p95, p99 and the largest.
fn spread(what: &str, misses: &[Miss]) -> Spread {
    let of = |of: fn(&Miss) -> f64| {
        let mut values: Vec<f64> = misses.iter().map(of).collect();
        values.sort_by(f64::total_cmp);
        [0.5, 0.95, 0.99, 1.0].map(|share| values[((values.len() - 1) as f64 * share) as usize])
    };
    let spread = Spread {
        middle: of(|miss| miss.middle_px),
        rim: of(|miss| miss.rim_px),
        wrong_faces: misses.iter().filter(|miss| miss.face).count(),
    };
    println!("{what}, {} parts: {spread:.3?}", misses.len());
    spread
}

/// More parts than usual are drawn if the environment variable POSES says so.
fn count() -> u64 {
    let asked = std::env::var("POSES")
        .ok()
        .and_then(|text| text.parse().ok());
    asked.unwrap_or(24)
}

/// A bite, a burr or a broken corner; that one in one of the given directions, in radians.
fn one_flaw(random: &mut Pcg64Mcg, radius: f64, broken: std::ops::Range<f64>) -> Vec<Flaw> {
    let angle: f64 = random.random_range(0.0..std::f64::consts::TAU);
    let at = radius * random.random_range(0.5..1.0);
    let (x, y) = (at * angle.cos(), at * angle.sin());
    let radius_of_flaw = radius * random.random_range(0.05..0.25);
    vec![match random.random_range(0..3) {
        0 => Flaw::Bite {
            x,
            y,
            radius: radius_of_flaw,
        },
        1 => Flaw::Burr {
            x,
            y,
            radius: radius_of_flaw,
        },
        _ => Flaw::Broken {
            angle: random.random_range(broken),
            at: radius * random.random_range(0.6..0.9),
        },
    }]
}

/// 38 mm at 0.25 mm to a pixel.
#[test]
fn stars_are_found_to_a_tenth_of_a_pixel() {
    let mut star = Taught::new(Outline::star(76.0));
    let good = spread("good stars", &star.misses(|_| Vec::new()));
    assert!(good.middle[3] <= 0.1 && good.rim[3] <= 0.2, "{good:?}");
    let flawed = star.misses(|random| one_flaw(random, 76.0, 0.0..std::f64::consts::TAU));
    let flawed = spread("stars with a flaw", &flawed);
    assert!(
        flawed.middle[3] <= 0.3 && flawed.rim[3] <= 0.3,
        "{flawed:?}"
    );
}

/// Its angle hangs on the tab alone, whose sides are 18 px long. When they lie within a few degrees of a row, a column or
/// a diagonal, they can be moved by 0.3 px without a change to any pixel: no more can be known.
///
/// What is broken off leaves the tab, without which a ring has no angle.
#[test]
fn gaskets_are_found_with_their_face() {
    let mut gasket = Taught::new(Outline::gasket(60.0));
    let good = spread("good gaskets", &gasket.misses(|_| Vec::new()));
    assert!(good.middle[3] <= 0.1 && good.wrong_faces == 0, "{good:?}");
    assert!(good.rim[1] <= 0.2 && good.rim[3] <= 0.4, "{good:?}");
    let flawed = gasket.misses(|random| one_flaw(random, 60.0, 1.4..5.2));
    let flawed = spread("gaskets with a flaw", &flawed);
    assert!(
        flawed.middle[3] <= 0.3 && flawed.wrong_faces == 0,
        "{flawed:?}"
    );
    assert!(flawed.rim[1] <= 0.3 && flawed.rim[3] <= 0.4, "{flawed:?}");
}

/// Of two parts that have grown together in any arrangement, the silhouette comes to lie on one.
#[test]
fn one_of_two_joined_parts_is_found() {
    let pairs = [
        (Outline::star(76.0), 100.0..150.0),
        (Outline::gasket(60.0), 90.0..118.0),
    ];
    for (outline, apart) in pairs {
        let mut taught = Taught::new(outline);
        for seed in 0..count() / 2 {
            let mut random = Pcg64Mcg::seed_from_u64(seed);
            let towards: f64 = random.random_range(0.0..std::f64::consts::TAU);
            let half = 0.5 * random.random_range(apart.clone());
            let mut part = |side: f64| Pose {
                x_px: 170.0 + side * half * towards.cos(),
                y_px: 170.0 + side * half * towards.sin(),
                angle_deg: random.random_range(0.0..360.0),
                flipped: false,
            };
            let (one, other) = (part(1.0), part(-1.0));
            let mut picture = taught.outline.draw(one, &[], (340, 340));
            taught.outline.add_to(&mut picture, other, &[]);
            let found = taught.find(&picture);
            assert!(
                taught.overlay.covered() > 0.9,
                "{seed} {one:?} {other:?} {found:?}"
            );
        }
    }
}
