//! Answers questions about the statistics, so that a script in another language can hold them against other programs.
//!
//! One JSON object a line on standard input, until it ends; for each, one JSON line on standard output. A request names its
//! `op`; what goes wrong comes back as `{"error": ...}`. The empty list `blobs` says that no bytes follow.

use std::io::{BufRead, Write};

use anyhow::Context;
use beltwright::stats::{
    Count, Share, Tradeoff, fewest_for_order_limit, fewest_without_failure, one_sided_factor,
    order_limit, rule_of_three, two_sided_factor,
};
use serde::Deserialize;
use serde_json::{Value, json};

#[derive(Deserialize)]
#[serde(tag = "op", rename_all = "snake_case", deny_unknown_fields)]
enum Request {
    Bounds {
        hits: u64,
        of: u64,
        confidence: f64,
    },
    RuleOfThree {
        n: u64,
    },
    FewestWithoutFailure {
        at_most: f64,
        confidence: f64,
    },
    Factors {
        n: u64,
        coverage: f64,
        confidence: f64,
    },
    OrderLimit {
        n: u64,
        coverage: f64,
        confidence: f64,
    },
    FewestForOrderLimit {
        place: u64,
        coverage: f64,
        confidence: f64,
    },
    /// Figures of good and of bad parts; a null stands for infinity.
    Tradeoff {
        good: Vec<Option<f64>>,
        bad: Vec<Option<f64>>,
    },
}

fn main() -> anyhow::Result<()> {
    for line in std::io::stdin().lock().lines() {
        let mut answer =
            respond(&line?).unwrap_or_else(|error| json!({"error": format!("{error:#}")}));
        answer["blobs"] = json!([]);
        let mut out = std::io::stdout().lock();
        writeln!(out, "{answer}")?;
        out.flush()?;
    }
    Ok(())
}

fn respond(line: &str) -> anyhow::Result<Value> {
    Ok(match serde_json::from_str(line)? {
        Request::Bounds {
            hits,
            of,
            confidence,
        } => {
            let (count, confidence) = (Count::new(hits, of), share(confidence)?);
            let between = count.between(confidence);
            json!({
                "low": between.low,
                "high": between.high,
                "at_least": count.at_least(confidence),
                "at_most": count.at_most(confidence),
            })
        }
        Request::RuleOfThree { n } => json!({"at_most": rule_of_three(n)}),
        Request::FewestWithoutFailure {
            at_most,
            confidence,
        } => json!({"n": fewest_without_failure(share(at_most)?, share(confidence)?)}),
        Request::Factors {
            n,
            coverage,
            confidence,
        } => {
            let (coverage, confidence) = (share(coverage)?, share(confidence)?);
            json!({
                "one_sided": one_sided_factor(n, coverage, confidence),
                "two_sided": two_sided_factor(n, coverage, confidence),
            })
        }
        Request::OrderLimit {
            n,
            coverage,
            confidence,
        } => json!({"place": order_limit(n, share(coverage)?, share(confidence)?)}),
        Request::FewestForOrderLimit {
            place,
            coverage,
            confidence,
        } => json!({"n": fewest_for_order_limit(place, share(coverage)?, share(confidence)?)}),
        Request::Tradeoff { good, bad } => tradeoff(good, bad),
    })
}

fn share(value: f64) -> anyhow::Result<Share> {
    Share::new(value).with_context(|| format!("{value} is no share"))
}

fn tradeoff(good: Vec<Option<f64>>, bad: Vec<Option<f64>>) -> Value {
    let [good, bad] = [good, bad].map(|figures| {
        let figure = |figure: Option<f64>| figure.unwrap_or(f64::INFINITY);
        figures.into_iter().map(figure).collect::<Vec<_>>()
    });
    let curve = Tradeoff::of(&good, &bad);
    let points = curve
        .points
        .iter()
        .map(|point| json!([point.misses, point.false_rejects]));
    json!({"points": points.collect::<Vec<_>>(), "area": curve.area()})
}
