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
        self.finder.find(&region, &runs, &self.model, &mut self.overlay)
    }

    fn miss(&self, found: Pose, drawn: Pose) -> Miss {
        let (sin, cos) = drawn.angle_deg.to_radians().sin_cos();
        let centroid = self.model.centroid;
        let side = if drawn.flipped { -1.0 } else { 1.0 };
        let (u, v) = (side * (centroid.0 - self.centre.0), centroid.1 - self.centre.1);
        let x = drawn.x_px + cos * u - sin * v;
        let y = drawn.y_px + sin * u + cos * v;
        let symmetry = self.model.symmetry();
        let span = symmetry.span_deg();
        let turn = if span > 0.0 { (found.angle_deg - drawn.angle_deg).rem_euclid(span) } else { 0.0 };
        Miss {
            middle_px: (found.x_px - x).hypot(found.y_px - y),
            rim_px: turn.min(span - turn).to_radians() * self.model.radius_px,
            face: !symmetry.mirror && found.flipped != drawn.flipped,
        }
    }

    /// Draws and finds `count` parts with the flaws that `flaws` thinks up.
    fn misses(&mut self, count: u64, flaws: impl Fn(&mut Pcg64Mcg) -> Vec<Flaw>) -> Vec<Miss> {
        let mut misses = Vec::new();
        for seed in 0..count {
            let mut random = Pcg64Mcg::seed_from_u64(seed);
            let flipped = !self.model.symmetry().mirror && random.random_bool(0.5);
            let pose = random_pose(&mut random, flipped);
            let flaws = flaws(&mut random);
            let picture = self.outline.draw(pose, &flaws, (260, 260));
            let found = self.find(&picture);
            let miss = self.miss(found.pose, pose);
            if std::env::var_os("SHOW_MISSES").is_some() && (miss.middle_px > 0.3 || miss.rim_px > 0.3) {
                let (region, runs) = picture.to_region().unwrap();
                let (sin, cos) = pose.angle_deg.to_radians().sin_cos();
                let side = if pose.flipped { -1.0 } else { 1.0 };
                let c = (side * (self.model.centroid.0 - self.centre.0), self.model.centroid.1 - self.centre.1);
                let t = Pose { x_px: pose.x_px + cos * c.0 - sin * c.1, y_px: pose.y_px + sin * c.0 + cos * c.1, ..pose };
                self.overlay.place(&region, &runs, &self.model, t);
                eprintln!("true fit {}", self.overlay.fit());
                eprintln!("{seed} {miss:?} {pose:?} {flaws:?} {found:?}");
            }
            misses.push(miss);
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

/// Prints the spread and returns the largest of each.
fn worst(what: &str, misses: &[Miss]) -> Miss {
    let sorted = |of: fn(&Miss) -> f64| {
        let mut values: Vec<f64> = misses.iter().map(of).collect();
        values.sort_by(f64::total_cmp);
        values
    };
    let (middle, rim) = (sorted(|miss| miss.middle_px), sorted(|miss| miss.rim_px));
    let at = |values: &[f64], share: f64| values[((values.len() - 1) as f64 * share) as usize];
    let line = |values: &[f64]| {
        let [p50, p95, p99, max] = [0.5, 0.95, 0.99, 1.0].map(|share| at(values, share));
        format!("p50 {p50:.3} p95 {p95:.3} p99 {p99:.3} max {max:.3}")
    };
    let faces = misses.iter().filter(|miss| miss.face).count();
    println!("{what}: middle {} px, rim {} px, {faces} wrong faces", line(&middle), line(&rim));
    Miss {
        middle_px: at(&middle, 1.0),
        rim_px: at(&rim, 1.0),
        face: faces > 0,
    }
}

fn count() -> u64 {
    std::env::var("POSES").ok().and_then(|text| text.parse().ok()).unwrap_or(60)
}

fn one_flaw(random: &mut Pcg64Mcg, radius: f64) -> Vec<Flaw> {
    let angle: f64 = random.random_range(0.0..std::f64::consts::TAU);
    let at = radius * random.random_range(0.5..1.0);
    let (x, y) = (at * angle.cos(), at * angle.sin());
    vec![match random.random_range(0..3) {
        0 => Flaw::Bite {
            x,
            y,
            radius: radius * random.random_range(0.05..0.25),
        },
        1 => Flaw::Burr {
            x,
            y,
            radius: radius * random.random_range(0.05..0.25),
        },
        _ => Flaw::Broken {
            angle,
            at: radius * random.random_range(0.6..0.9),
        },
    }]
}

/// A star of 38 mm and a ring with a tab of 30 mm at 0.25 mm to a pixel.
fn shapes() -> [(&'static str, Outline, f64); 2] {
    [("star", Outline::star(76.0), 76.0), ("gasket", Outline::gasket(60.0), 60.0)]
}

#[test]
fn good_parts_are_found_to_a_tenth_of_a_pixel() {
    for (name, outline, _) in shapes() {
        let misses = Taught::new(outline).misses(count(), |_| Vec::new());
        let worst = worst(name, &misses);
        assert!(worst.middle_px <= 0.1 && worst.rim_px <= 0.2 && !worst.face, "{worst:?}");
    }
}

#[test]
fn parts_with_a_flaw_are_found_nearly_as_well() {
    for (name, outline, radius) in shapes() {
        let misses = Taught::new(outline).misses(count(), |random| one_flaw(random, radius));
        let worst = worst(name, &misses);
        assert!(worst.middle_px <= 0.3 && worst.rim_px <= 0.3 && !worst.face, "{worst:?}");
    }
}

#[test]
#[ignore]
fn timing() {
    for (name, outline, radius) in shapes() {
        let mut taught = Taught::new(outline);
        for flawed in [false, true] {
            let mut pictures = Vec::new();
            for seed in 0..50 {
                let mut random = Pcg64Mcg::seed_from_u64(seed);
                let pose = random_pose(&mut random, false);
                let flaws = if flawed { one_flaw(&mut random, radius) } else { vec![] };
                pictures.push(taught.outline.draw(pose, &flaws, (260, 260)).to_region().unwrap());
            }
            let mut times = Vec::new();
            for _ in 0..20 {
                for (region, runs) in &pictures {
                    let start = std::time::Instant::now();
                    std::hint::black_box(taught.finder.find(region, runs, &taught.model, &mut taught.overlay));
                    times.push(start.elapsed().as_secs_f64() * 1e6);
                }
            }
            times.sort_by(f64::total_cmp);
            let mut gauge = super::gauge::Gauge::default();
            let start = std::time::Instant::now();
            for _ in 0..200 { std::hint::black_box(taught.overlay.gauge(&mut gauge, 4.0)); }
            let g = start.elapsed().as_secs_f64() * 1e6 / 200.0;
            {
                let mut pts = Vec::new();
                let (region, runs) = &pictures[3];
                let t = |what: &str, f: &mut dyn FnMut()| {
                    let mut v: Vec<f64> = (0..200).map(|_| { let s = std::time::Instant::now(); f(); s.elapsed().as_secs_f64() * 1e6 }).collect();
                    v.sort_by(f64::total_cmp);
                    println!("   {what} {:.1}", v[100]);
                };
                t("collect", &mut || super::edge::collect(region, runs, &mut pts));
                let pose = taught.finder.find(region, runs, &taught.model, &mut taught.overlay).pose;
                t("place", &mut || taught.overlay.place(region, runs, &taught.model, pose));
                let place = super::align::Place{x:pose.x_px - region.x_min as f64, y:pose.y_px - region.y_min as f64, angle:pose.angle_deg.to_radians(), flipped:false};
                println!("   points {}", pts.len());
                t("cost", &mut || { std::hint::black_box(super::align::cost(&taught.model, &pts, &place, 3.0)); });
                t("step", &mut || { let mut p = place; super::align::step(&taught.model, &pts, &mut p, super::align::Kernel::Biweight { scale_px: 3.0 }); std::hint::black_box(p); });
                t("step gm", &mut || { let mut p = place; super::align::step(&taught.model, &pts, &mut p, super::align::Kernel::GemanMcClure { scale_px: 3.0 }); std::hint::black_box(p); });
            }
            println!("{name} {flawed} p50 {:.0} p90 {:.0} max {:.0} us; gauge {g:.1}", times[500], times[900], times[999]);
        }
    }
}
