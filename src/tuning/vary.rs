//! The settings that a sweep tries: a grid of values, all of it or some of it drawn from a seed.

use std::collections::BTreeSet;
use std::str::FromStr;

use rand::{RngExt, SeedableRng};
use rand_pcg::Pcg64;
use thiserror::Error;

/// Most values of one key.
const MOST_VALUES: usize = 100_000;

/// A key with the values that are tried, as they are typed.
#[derive(Clone, Debug, PartialEq)]
pub struct Axis {
    /// Such as `shape[0].missing_mm`.
    pub key: String,
    /// At least one.
    pub values: Vec<String>,
}

/// What is wrong with a `--vary`.
#[derive(Clone, Debug, Error, PartialEq)]
#[error("expected KEY=LO..HI:STEP or KEY=A,B,C, such as shape[0].missing_mm=1.5..2.5:0.1: {0}")]
pub struct BadAxis(&'static str);

impl FromStr for Axis {
    type Err = BadAxis;

    fn from_str(text: &str) -> Result<Self, BadAxis> {
        let (key, values) = text.split_once('=').ok_or(BadAxis("there is no ="))?;
        let (key, values) = (key.trim(), values.trim());
        if key.is_empty() || values.is_empty() {
            return Err(BadAxis("key or values are empty"));
        }
        let values = match values.split_once("..") {
            Some((low, rest)) => range(low.trim(), rest)?,
            None => values
                .split(',')
                .map(|value| value.trim().to_owned())
                .collect(),
        };
        if values.iter().any(String::is_empty) {
            return Err(BadAxis("a value is empty"));
        }
        Ok(Self {
            key: key.to_owned(),
            values,
        })
    }
}

/// Both ends belong to it; the upper one if the steps reach it.
fn range(low: &str, rest: &str) -> Result<Vec<String>, BadAxis> {
    let (high, step) = rest
        .split_once(':')
        .ok_or(BadAxis("a range needs a step"))?;
    let number = |text: &str| {
        text.trim()
            .parse()
            .ok()
            .filter(|value: &f64| value.is_finite())
    };
    let numbers = (number(low), number(high), number(step));
    let (Some(low_at), Some(high_at), Some(step_by)) = numbers else {
        return Err(BadAxis("LO, HI and STEP are numbers"));
    };
    if step_by <= 0.0 || high_at < low_at {
        return Err(BadAxis("STEP is above 0, and HI not below LO"));
    }
    let count = ((high_at - low_at) / step_by + 1e-9).floor();
    if count >= MOST_VALUES as f64 {
        return Err(BadAxis("more than 100000 values"));
    }
    // As many decimals as were typed, so that 1.5 + 3 * 0.1 is 1.8 and nothing near it.
    let decimals = |text: &str| {
        text.trim()
            .split_once('.')
            .map_or(0, |(_, digits)| digits.len())
    };
    let places = decimals(low).max(decimals(step));
    let value = |k: usize| format!("{:.places$}", low_at + k as f64 * step_by);
    Ok((0..=count as usize).map(value).collect())
}

/// Which of the grid's points are tried.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Choice {
    /// All of them.
    All,
    /// As many as `count`, each at most once, drawn from `seed`.
    Random {
        /// How many.
        count: usize,
        /// The same seed draws the same points.
        seed: u64,
    },
}

/// The size of the grid.
pub fn grid_size(axes: &[Axis]) -> u128 {
    axes.iter().map(|axis| axis.values.len() as u128).product()
}

/// The points that are tried, each as one index of a value for each axis; the last axis moves fastest.
pub fn points(axes: &[Axis], choice: Choice) -> Vec<Vec<usize>> {
    let size = grid_size(axes);
    let point = |mut index: u128| {
        let mut place = vec![0; axes.len()];
        for (at, axis) in place.iter_mut().zip(axes).rev() {
            let count = axis.values.len() as u128;
            *at = (index % count) as usize;
            index /= count;
        }
        place
    };
    match choice {
        Choice::Random { count, seed } if (count as u128) < size => {
            let mut random = Pcg64::seed_from_u64(seed);
            let mut drawn = BTreeSet::new();
            while drawn.len() < count {
                drawn.insert(random.random_range(0..size));
            }
            drawn.into_iter().map(point).collect()
        }
        _ => (0..size).map(point).collect(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn axis(text: &str) -> Axis {
        text.parse().unwrap()
    }

    #[test]
    fn values_are_those_that_were_typed() {
        assert_eq!(
            axis("shape[0].missing_mm=1.5..2.0:0.1").values,
            ["1.5", "1.6", "1.7", "1.8", "1.9", "2.0"]
        );
        assert_eq!(axis("a.b = 40 .. 47:3").values, ["40", "43", "46"]);
        assert_eq!(
            axis("picture.element=square,octagon").values,
            ["square", "octagon"]
        );
        for bad in [
            "a",
            "=1..2:1",
            "a=1..2",
            "a=2..1:1",
            "a=1..2:0",
            "a=x..2:1",
            "a=1,,2",
            "a=0..1:1e-9",
            "a=0..inf:1",
        ] {
            assert!(bad.parse::<Axis>().is_err(), "{bad}");
        }
    }

    #[test]
    fn a_grid_is_tried_whole_or_in_part() {
        let axes = [axis("a=1..3:1"), axis("b=1..4:1")];
        let all = points(&axes, Choice::All);
        assert_eq!(all.len(), 12);
        assert_eq!(
            (all[0].clone(), all[1].clone(), all[4].clone()),
            (vec![0, 0], vec![0, 1], vec![1, 0])
        );
        let choice = |count, seed| Choice::Random { count, seed };
        let some = points(&axes, choice(5, 1));
        assert_eq!(some.len(), 5);
        assert!(some.windows(2).all(|pair| pair[0] < pair[1]));
        assert_eq!(some, points(&axes, choice(5, 1)));
        assert_ne!(some, points(&axes, choice(5, 2)));
        assert_eq!(points(&axes, choice(99, 1)), all);
    }
}
