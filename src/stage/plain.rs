//! The plain definitions that the tests hold the stage against: pixel by pixel, from sets, without any cleverness.

use super::plan::{Element, Plan, Polarity, Threshold};

/// A picture as rows of columns.
#[derive(Clone, Debug, PartialEq)]
pub struct Grid<T> {
    pub width: usize,
    pub height: usize,
    pub cells: Vec<T>,
}

impl<T: Copy> Grid<T> {
    pub fn new(width: usize, height: usize, cell: impl Fn(usize, usize) -> T) -> Self {
        let cells = (0..width * height)
            .map(|i| cell(i % width, i / width))
            .collect();
        Self {
            width,
            height,
            cells,
        }
    }

    pub fn at(&self, x: usize, y: usize) -> T {
        self.cells[y * self.width + x]
    }

    pub fn get(&self, x: isize, y: isize) -> Option<T> {
        let inside =
            (0..self.width as isize).contains(&x) && (0..self.height as isize).contains(&y);
        inside.then(|| self.at(x as usize, y as usize))
    }

    fn map<U: Copy>(&self, of: impl Fn(usize, usize) -> U) -> Grid<U> {
        Grid::new(self.width, self.height, of)
    }
}

/// The element as a set of (x, y) offsets.
pub fn set_of(element: Element) -> Vec<(isize, isize)> {
    let range = |size: usize| {
        let before = (size / 2) as isize;
        -before..size as isize - before
    };
    match element {
        Element::Rectangle {
            width_px,
            height_px,
        } => range(height_px)
            .flat_map(|y| range(width_px).map(move |x| (x, y)))
            .collect(),
        Element::Octagon { diameter_px } => {
            let r = (diameter_px as isize - 1) / 2;
            // The documented set, with its own arithmetic: g = (1 - 1/sqrt 2) r rounded, at most (r - 1) / 2.
            let g = (r as f64 * 0.292_893_218_813_452_4).round() as isize;
            let h = r - 2 * g.min((r - 1).max(0) / 2);
            (-r..=r)
                .flat_map(|y| (-r..=r).map(move |x| (x, y)))
                .filter(|(x, y)| x.abs() + y.abs() <= r + h)
                .collect()
        }
    }
}

pub fn reflected(set: &[(isize, isize)]) -> Vec<(isize, isize)> {
    set.iter().map(|&(x, y)| (-x, -y)).collect()
}

/// The smallest value under the element, outside ignored.
pub fn erode(picture: &Grid<u8>, set: &[(isize, isize)]) -> Grid<u8> {
    over(picture, set).map_cells(|values| values.min())
}

/// The largest value under the element, outside ignored.
pub fn dilate(picture: &Grid<u8>, set: &[(isize, isize)]) -> Grid<u8> {
    over(picture, set).map_cells(|values| values.max())
}

struct Over<'a>(&'a Grid<u8>, &'a [(isize, isize)]);

fn over<'a>(picture: &'a Grid<u8>, set: &'a [(isize, isize)]) -> Over<'a> {
    Over(picture, set)
}

impl Over<'_> {
    fn map_cells(&self, of: impl Fn(&mut dyn Iterator<Item = u8>) -> Option<u8>) -> Grid<u8> {
        self.0.map(|x, y| {
            let mut values = self
                .1
                .iter()
                .filter_map(|&(dx, dy)| self.0.get(x as isize + dx, y as isize + dy));
            of(&mut values).expect("the origin is inside")
        })
    }
}

/// The top-hat by its definition.
pub fn top_hat(picture: &Grid<u8>, polarity: Polarity, element: Element) -> Grid<u8> {
    let set = set_of(element);
    match polarity {
        Polarity::Bright => {
            let opening = dilate(&erode(picture, &set), &reflected(&set));
            picture.map(|x, y| picture.at(x, y) - opening.at(x, y))
        }
        Polarity::Dark => {
            let closing = erode(&dilate(picture, &reflected(&set)), &set);
            picture.map(|x, y| closing.at(x, y) - picture.at(x, y))
        }
    }
}

/// Number of the region of every cell of `set`, by flooding; regions numbered by their first cell, row by row.
pub fn label(set: &Grid<bool>, eight: bool) -> (Grid<Option<usize>>, usize) {
    let mut labels = set.map(|_, _| None);
    let mut count = 0;
    for start in 0..set.cells.len() {
        if !set.cells[start] || labels.cells[start].is_some() {
            continue;
        }
        let mut todo = vec![start];
        labels.cells[start] = Some(count);
        while let Some(cell) = todo.pop() {
            let (x, y) = ((cell % set.width) as isize, (cell / set.width) as isize);
            for (dx, dy) in neighbours(eight) {
                if set.get(x + dx, y + dy) == Some(true) {
                    let next = (y + dy) as usize * set.width + (x + dx) as usize;
                    if labels.cells[next].is_none() {
                        labels.cells[next] = Some(count);
                        todo.push(next);
                    }
                }
            }
        }
        count += 1;
    }
    (labels, count)
}

fn neighbours(eight: bool) -> impl Iterator<Item = (isize, isize)> {
    (-1..=1isize)
        .flat_map(|y| (-1..=1isize).map(move |x| (x, y)))
        .filter(move |(x, y)| eight && (*x, *y) != (0, 0) || x.abs() + y.abs() == 1)
}

/// Closes background regions (4-connected) of at most `limit` cells that do not touch the border.
pub fn fill(set: &Grid<bool>, limit: u64) -> Grid<bool> {
    let background = set.map(|x, y| !set.at(x, y));
    let (labels, count) = label(&background, false);
    let mut areas = vec![0; count];
    let mut open = vec![false; count];
    for y in 0..set.height {
        for x in 0..set.width {
            if let Some(name) = labels.at(x, y) {
                areas[name] += 1;
                open[name] |= x == 0 || y == 0 || x + 1 == set.width || y + 1 == set.height;
            }
        }
    }
    set.map(|x, y| {
        labels
            .at(x, y)
            .is_none_or(|name| !open[name] && areas[name] <= limit)
    })
}

/// The level of greatest between-class variance, every level tried in turn.
pub fn otsu(picture: &Grid<u8>) -> u8 {
    let of = |keep: &dyn Fn(u8) -> bool| {
        let chosen: Vec<f64> = picture
            .cells
            .iter()
            .filter(|&&v| keep(v))
            .map(|&v| f64::from(v))
            .collect();
        (
            chosen.len() as f64,
            chosen.iter().sum::<f64>() / chosen.len() as f64,
        )
    };
    let mut best = (0.0, picture.cells.iter().copied().max().unwrap_or(0));
    for level in 0..=254 {
        let ((n, mean), (m, other)) = (of(&|v| v <= level), of(&|v| v > level));
        let variance = n * m * (mean - other) * (mean - other);
        if n > 0.0 && m > 0.0 && variance > best.0 * (1.0 + 1e-12) {
            best = (variance, level);
        }
    }
    best.1
}

/// The foreground after the threshold.
pub fn binary(hat: &Grid<u8>, threshold: Threshold) -> Grid<bool> {
    match threshold {
        Threshold::Fixed { level } => hat.map(|x, y| hat.at(x, y) > level),
        Threshold::Otsu { floor } => {
            let level = otsu(hat).max(floor);
            hat.map(|x, y| hat.at(x, y) > level)
        }
        Threshold::Hysteresis { low, high } => {
            let (labels, count) = label(&hat.map(|x, y| hat.at(x, y) > low), true);
            let mut sure = vec![false; count];
            for (name, &value) in labels.cells.iter().zip(&hat.cells) {
                if let Some(name) = name {
                    sure[*name] |= value > high;
                }
            }
            hat.map(|x, y| labels.at(x, y).is_some_and(|name| sure[name]))
        }
    }
}

/// The filled foreground of the whole plan.
pub fn foreground(picture: &Grid<u8>, plan: &Plan) -> Grid<bool> {
    let hat = top_hat(picture, plan.polarity, plan.element);
    fill(&binary(&hat, plan.threshold), plan.fill_below_px)
}
