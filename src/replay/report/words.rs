//! Counts and bounds in words.

use crate::stats::{Count, Share, rule_of_three};

/// Which way a figure is rounded, so that a bound stays one.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Rounding {
    /// For lower bounds.
    Down,
    /// For what was counted.
    Nearest,
    /// For upper bounds.
    Up,
}

/// A share in percent with two significant digits, or one decimal from 10 % on.
pub fn percent(share: f64, rounding: Rounding) -> String {
    // So that 0.07 * 100 = 7.000000000000001 does not become 7.1.
    const SLACK: f64 = 1e-12;
    let percent = share * 100.0;
    if percent <= 0.0 || percent >= 100.0 {
        return format!("{percent:.0} %");
    }
    let places = if percent >= 10.0 {
        1
    } else {
        (1.0 - percent.log10().floor()) as usize
    };
    let unit = 10f64.powi(places as i32);
    let whole = match rounding {
        Rounding::Down => (percent * unit * (1.0 + SLACK)).floor(),
        Rounding::Nearest => (percent * unit).round(),
        Rounding::Up => (percent * unit * (1.0 - SLACK)).ceil(),
    };
    format!("{:.places$} %", whole / unit)
}

/// What is counted, and among what.
#[derive(Clone, Copy, Debug)]
pub struct Nouns {
    /// One of them.
    pub one: &'static str,
    /// Several.
    pub many: &'static str,
    /// One of those it is counted among.
    pub among_one: &'static str,
    /// Several.
    pub among_many: &'static str,
}

impl Nouns {
    /// `no miss in 312 bad parts`.
    pub fn counted(&self, count: Count) -> String {
        let among = if count.of() == 1 {
            self.among_one
        } else {
            self.among_many
        };
        match count.hits() {
            0 => format!("no {} in {} {among}", self.one, count.of()),
            1 => format!("1 {} in {} {among}", self.one, count.of()),
            hits => format!("{hits} {} in {} {among}", self.many, count.of()),
        }
    }

    /// What the count says about the chance behind it. The ends are those of the exact two-sided interval.
    pub fn sentence(&self, count: Count, confidence: Share) -> String {
        let Some(ratio) = count.ratio() else {
            return format!("no {} at all, so nothing can be said", self.among_one);
        };
        let interval = count.between(confidence);
        let counted = self.counted(count);
        let high = percent(interval.high, Rounding::Up);
        if count.hits() == 0 {
            return format!("{counted}: at most {high} at {confidence} % confidence");
        }
        let low = percent(interval.low, Rounding::Down);
        let ratio = percent(ratio, Rounding::Nearest);
        format!("{counted} ({ratio}): between {low} and {high} at {confidence} % confidence")
    }

    /// The rule of three beside the exact one-sided bound; `None` when there was a hit, or nothing to hit.
    pub fn in_the_head(&self, count: Count) -> Option<String> {
        (count.hits() == 0 && count.of() > 0).then(|| {
            let n = count.of();
            let rule = percent(rule_of_three(n).min(1.0), Rounding::Up);
            let exact = percent(count.at_most(Share::P95), Rounding::Up);
            format!(
                "By the rule of three (Eypasch et al., BMJ 311, 1995) 3 / {n} = {rule}, which stands for the one-sided bound: \
                 exactly {exact}."
            )
        })
    }
}

/// Bad parts that would pass.
pub const MISSES: Nouns = Nouns {
    one: "miss",
    many: "misses",
    among_one: "bad part",
    among_many: "bad parts",
};

/// Good parts that would be rejected.
pub const FALSE_REJECTS: Nouns = Nouns {
    one: "false reject",
    many: "false rejects",
    among_one: "good part",
    among_many: "good parts",
};

/// Hundredths of a millimetre; zero has no sign.
pub fn mm(value: f64) -> String {
    let text = format!("{value:.2}");
    if text == "-0.00" {
        "0.00".to_owned()
    } else {
        text
    }
}

/// `1 part`, `2 parts`.
pub fn counted(count: usize, one: &str, many: &str) -> String {
    format!("{count} {}", if count == 1 { one } else { many })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn bounds_round_away_from_what_was_seen() {
        assert_eq!(percent(0.011_75, Rounding::Up), "1.2 %");
        assert_eq!(percent(0.011_75, Rounding::Down), "1.1 %");
        assert_eq!(percent(0.07, Rounding::Up), "7.0 %");
        assert_eq!(percent(0.07, Rounding::Down), "7.0 %");
        assert_eq!(percent(8.767_247e-6, Rounding::Up), "0.00088 %");
        assert_eq!(percent(0.362_16, Rounding::Nearest), "36.2 %");
        assert_eq!(percent(0.999_96, Rounding::Up), "100.0 %");
        assert_eq!(percent(0.0, Rounding::Up), "0 %");
        assert_eq!(percent(1.0, Rounding::Down), "100 %");
    }

    #[test]
    fn sentences_say_what_a_count_is_worth() {
        assert_eq!(
            MISSES.sentence(Count::new(0, 312), Share::P95),
            "no miss in 312 bad parts: at most 1.2 % at 95 % confidence"
        );
        assert_eq!(
            MISSES.sentence(Count::new(5, 100), Share::P95),
            "5 misses in 100 bad parts (5.0 %): between 1.6 % and 11.3 % at 95 % confidence"
        );
        assert_eq!(MISSES.counted(Count::new(1, 1)), "1 miss in 1 bad part");
        assert_eq!(
            MISSES.sentence(Count::new(0, 0), Share::P95),
            "no bad part at all, so nothing can be said"
        );
        let rule = MISSES.in_the_head(Count::new(0, 300)).unwrap();
        assert!(
            rule.contains("3 / 300 = 1.0 %") && rule.contains("exactly 1.00 %"),
            "{rule}"
        );
        assert_eq!(MISSES.in_the_head(Count::new(1, 300)), None);
    }
}
