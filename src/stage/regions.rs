//! Regions of foreground (8-connected), found by joining runs that touch: Rosenfeld & Pfaltz 1966 on runs, with disjoint
//! sets. Moments are sums of integers and exact until the last division.

use super::forest::Forest;
use super::runs::RunRows;
use super::scene::{Region, Run, Scene};

/// Joins every run with those of the row above that touch it, also by a corner.
pub(crate) fn connect(rows: &RunRows, forest: &mut Forest) {
    let runs = rows.runs();
    forest.restart(runs.len());
    for y in 1..rows.height() {
        let (above, below) = (rows.of_row(y - 1), rows.of_row(y));
        let (mut a, mut b) = (above.start, below.start);
        while a < above.end && b < below.end {
            if runs[a].x0 <= runs[b].x1 && runs[b].x0 <= runs[a].x1 {
                forest.join(a as u32, b as u32);
            }
            if runs[a].x1 <= runs[b].x1 {
                a += 1;
            } else {
                b += 1;
            }
        }
    }
}

/// Finds regions, with its buffers.
pub(crate) struct Regions {
    speck_below_px: u64,
    forest: Forest,
    /// The number of every run's region.
    names: Vec<u32>,
    sums: Vec<Sums>,
}

impl Regions {
    pub fn new(speck_below_px: u64, width_px: usize, height_px: usize) -> Self {
        let runs = width_px.div_ceil(2) * height_px;
        Self {
            speck_below_px,
            forest: Forest::new(runs),
            names: Vec::with_capacity(runs),
            sums: Vec::with_capacity(most_regions(width_px, height_px)),
        }
    }

    /// Drops what is smaller than this from now on.
    pub fn set_speck(&mut self, speck_below_px: u64) {
        self.speck_below_px = speck_below_px;
    }

    /// A scene with room for every picture of this size.
    pub fn scene(&self, width_px: usize, height_px: usize) -> Scene {
        let pixels = (width_px * height_px) as u64;
        let by_area = pixels / self.speck_below_px.max(1);
        Scene {
            regions: Vec::with_capacity(most_regions(width_px, height_px).min(by_area as usize)),
            runs: Vec::with_capacity(width_px.div_ceil(2) * height_px),
            ..Scene::default()
        }
    }

    /// Fills in the regions, the runs and the specks of `scene`.
    pub fn run(&mut self, rows: &RunRows, scene: &mut Scene) {
        connect(rows, &mut self.forest);
        self.add_up(rows.runs());
        scene.regions.clear();
        scene.specks = 0;
        let mut end = 0;
        for sums in &mut self.sums {
            if sums.area < self.speck_below_px {
                scene.specks += 1;
                continue;
            }
            let start = end;
            end += sums.runs as usize;
            sums.next = Some(start as u32);
            scene.regions.push(sums.region(start..end));
        }
        self.sort(rows.runs(), end, &mut scene.runs);
    }

    /// Numbers the regions by their first run and adds up each one's runs.
    fn add_up(&mut self, runs: &[Run]) {
        self.names.clear();
        self.sums.clear();
        for (i, run) in runs.iter().enumerate() {
            let root = self.forest.find(i as u32);
            let name = match root as usize == i {
                true => self.sums.len() as u32,
                false => self.names[root as usize],
            };
            if root as usize == i {
                self.sums.push(Sums::starting_with(run));
            }
            self.sums[name as usize].add(run);
            self.names.push(name);
        }
    }

    /// Copies the runs of regions that stay, region after region.
    fn sort(&mut self, runs: &[Run], count: usize, sorted: &mut Vec<Run>) {
        sorted.clear();
        sorted.resize(count, Run { y: 0, x0: 0, x1: 0 });
        for (run, &name) in runs.iter().zip(&self.names) {
            if let Some(next) = &mut self.sums[name as usize].next {
                sorted[*next as usize] = *run;
                *next += 1;
            }
        }
    }
}

/// Regions that do not touch are at least two pixels apart either way.
fn most_regions(width_px: usize, height_px: usize) -> usize {
    width_px.div_ceil(2) * height_px.div_ceil(2)
}

/// What is added up over the runs of a region.
#[derive(Clone, Copy)]
struct Sums {
    area: u64,
    x: u64,
    y: u64,
    xx: u64,
    xy: u64,
    yy: u64,
    x_min: u32,
    x_max: u32,
    y_min: u32,
    y_max: u32,
    runs: u32,
    /// Where its next run goes; `None` for a speck.
    next: Option<u32>,
}

impl Sums {
    fn starting_with(run: &Run) -> Self {
        Self {
            area: 0,
            x: 0,
            y: 0,
            xx: 0,
            xy: 0,
            yy: 0,
            x_min: run.x0,
            x_max: run.x1,
            y_min: run.y,
            y_max: run.y + 1,
            runs: 0,
            next: None,
        }
    }

    fn add(&mut self, run: &Run) {
        let (x0, x1, y) = (u64::from(run.x0), u64::from(run.x1), u64::from(run.y));
        let length = x1 - x0;
        let x = length * (x0 + x1 - 1) / 2;
        self.area += length;
        self.x += x;
        self.y += length * y;
        self.xx += squares_below(x1) - squares_below(x0);
        self.xy += x * y;
        self.yy += length * y * y;
        self.x_min = self.x_min.min(run.x0);
        self.x_max = self.x_max.max(run.x1);
        self.y_max = run.y + 1;
        self.runs += 1;
    }

    fn region(&self, runs: std::ops::Range<usize>) -> Region {
        let area = self.area as f64;
        let central = |ab: u64, a: u64, b: u64| {
            let scaled = i128::from(self.area) * i128::from(ab) - i128::from(a) * i128::from(b);
            scaled as f64 / area
        };
        Region {
            area_px: self.area,
            x_min: self.x_min,
            y_min: self.y_min,
            x_max: self.x_max,
            y_max: self.y_max,
            centroid_x: self.x as f64 / area,
            centroid_y: self.y as f64 / area,
            mu20: central(self.xx, self.x, self.x),
            mu11: central(self.xy, self.x, self.y),
            mu02: central(self.yy, self.y, self.y),
            runs,
        }
    }
}

/// The sum of the squares of `0..n`.
fn squares_below(n: u64) -> u64 {
    n * n.saturating_sub(1) * (2 * n).saturating_sub(1) / 6
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::stage::plain::{self, Grid};
    use proptest::prelude::*;

    fn scene_of(set: &Grid<bool>, speck_below_px: u64) -> Scene {
        let mut rows = RunRows::new(set.width, set.height);
        for y in 0..set.height {
            let mut bits = vec![0u64; set.width.div_ceil(64)];
            for x in 0..set.width {
                bits[x / 64] |= u64::from(set.at(x, y)) << (x % 64);
            }
            rows.push_row(&bits);
        }
        let mut regions = Regions::new(speck_below_px, set.width, set.height);
        let mut scene = regions.scene(set.width, set.height);
        regions.run(&rows, &mut scene);
        let once = scene.clone();
        regions.run(&rows, &mut scene);
        assert_eq!(once, scene, "nothing is left over from the picture before");
        scene
    }

    fn drawn(rows: &[&str]) -> Grid<bool> {
        Grid::new(rows[0].len(), rows.len(), |x, y| {
            rows[y].as_bytes()[x] == b'1'
        })
    }

    fn close(a: f64, b: f64) -> bool {
        (a - b).abs() <= 1e-9 * b.abs().max(1.0)
    }

    /// The example in the docstring of `scipy.ndimage.label`, with the structure that joins over corners: 2 regions.
    #[test]
    fn scipy_label_example() {
        let scene = scene_of(&drawn(&["001100", "000100", "110010", "000100"]), 0);
        let areas: Vec<u64> = scene.regions.iter().map(|r| r.area_px).collect();
        assert_eq!(areas, [5, 2]);
        let columns: Vec<u32> = scene.runs[scene.regions[0].runs.clone()]
            .iter()
            .map(|r| r.x0)
            .collect();
        assert_eq!(columns, [2, 3, 4, 3]);
    }

    /// A chessboard of 30x30 is one region over corners (`scipy.ndimage.label`: 1 with 8 neighbours, 450 with 4).
    #[test]
    fn a_chessboard_is_one_region() {
        let scene = scene_of(&Grid::new(30, 30, |x, y| (x + y) % 2 == 0), 0);
        assert_eq!(scene.regions.len(), 1);
        assert_eq!(scene.regions[0].area_px, 450);
    }

    /// `SAMPLE` in `test_regionprops.py` of scikit-image: area, box, centroid and central moments.
    #[test]
    fn scikit_image_region_sample() {
        let scene = scene_of(
            &drawn(&[
                "000000000101100000",
                "000000001111000000",
                "000000001110000000",
                "000000001110000000",
                "000000111111000000",
                "000000111111111110",
                "000000111111111110",
                "101001101100111110",
                "011111110110001111",
                "011001110000000011",
            ]),
            0,
        );
        let [region] = &scene.regions[..] else {
            panic!("one region over corners")
        };
        assert_eq!(region.area_px, 72);
        assert_eq!(
            (region.y_min, region.x_min, region.y_max, region.x_max),
            (0, 0, 10, 18)
        );
        assert!(close(region.centroid_y, 5.666_666_666_666_667));
        assert!(close(region.centroid_x, 9.444_444_444_444_445));
        assert!(close(region.mu02, 436.0));
        assert!(close(region.mu20, 1_259.777_777_777_777_4));
        assert!(close(region.mu11, -87.333_333_333_333_03));
    }

    #[test]
    fn specks_are_dropped_and_counted() {
        let scene = scene_of(&drawn(&["1101", "0000", "0111", "1000"]), 2);
        assert_eq!(scene.specks, 1);
        let areas: Vec<u64> = scene.regions.iter().map(|r| r.area_px).collect();
        assert_eq!(areas, [2, 4]);
        assert_eq!(scene.regions[1].runs, 1..3);
        assert_eq!(scene.runs.len(), 3);
    }

    #[test]
    fn the_sums_of_the_largest_picture_fit() {
        let mut sums = Sums::starting_with(&Run { y: 0, x0: 0, x1: 1 });
        for y in 0..32_768 {
            sums.add(&Run {
                y,
                x0: 0,
                x1: 65_535,
            });
        }
        let region = sums.region(0..0);
        let (n, w, h) = (32_768.0 * 65_535.0, 65_535.0f64, 32_768.0f64);
        assert!(close(region.mu20 / (n * (w * w - 1.0) / 12.0), 1.0));
        assert!(close(region.mu02 / (n * (h * h - 1.0) / 12.0), 1.0));
        assert_eq!(region.mu11, 0.0);
    }

    proptest! {
        #[test]
        fn any_picture(
            (width, height, cells) in (1..90usize, 1..12usize).prop_flat_map(|(w, h)| {
                (Just(w), Just(h), proptest::collection::vec(proptest::bool::weighted(0.4), w * h))
            }),
            speck in 0..5u64,
        ) {
            let set = Grid { width, height, cells };
            let scene = scene_of(&set, speck);
            let (labels, count) = plain::label(&set, true);
            let mut kept = 0;
            for name in 0..count {
                let pixels: Vec<(u32, u32)> = (0..set.cells.len())
                    .filter(|&i| labels.cells[i] == Some(name))
                    .map(|i| ((i % width) as u32, (i / width) as u32))
                    .collect();
                if (pixels.len() as u64) < speck {
                    continue;
                }
                same(&scene, &scene.regions[kept], &pixels);
                kept += 1;
            }
            prop_assert_eq!(scene.regions.len(), kept);
            prop_assert_eq!(scene.specks as usize, count - kept);
        }
    }

    /// Holds a region against the list of its pixels, row by row.
    fn same(scene: &Scene, region: &Region, pixels: &[(u32, u32)]) {
        let runs = &scene.runs[region.runs.clone()];
        let listed: Vec<_> = runs
            .iter()
            .flat_map(|r| (r.x0..r.x1).map(|x| (x, r.y)))
            .collect();
        assert_eq!(listed, pixels);
        let n = pixels.len() as f64;
        let mean = |of: &dyn Fn(f64, f64) -> f64| {
            pixels
                .iter()
                .map(|&(x, y)| of(x.into(), y.into()))
                .sum::<f64>()
        };
        let (cx, cy) = (mean(&|x, _| x) / n, mean(&|_, y| y) / n);
        assert_eq!(region.area_px, pixels.len() as u64);
        assert!(close(region.centroid_x, cx) && close(region.centroid_y, cy));
        assert!(close(region.mu20, mean(&|x, _| (x - cx) * (x - cx))));
        assert!(close(region.mu11, mean(&|x, y| (x - cx) * (y - cy))));
        assert!(close(region.mu02, mean(&|_, y| (y - cy) * (y - cy))));
        let xs = || pixels.iter().map(|p| p.0);
        let ys = || pixels.iter().map(|p| p.1);
        assert_eq!(
            (Some(region.x_min), Some(region.x_max - 1)),
            (xs().min(), xs().max())
        );
        assert_eq!(
            (Some(region.y_min), Some(region.y_max - 1)),
            (ys().min(), ys().max())
        );
    }
}
