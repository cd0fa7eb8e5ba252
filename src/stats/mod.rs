//! How sure a count is, how far good parts spread, and what a limit costs: the statistics behind reports and teaching.
//!
//! Every function is exact to about ten digits or says what it approximates. Confidences and coverages are [`Share`]s, so
//! nothing here can fail on them.

mod binomial;
mod density;
mod gamma;
mod normal;
mod order;
mod root;
mod share;
mod tails;
mod tolerance;
mod tradeoff;

pub use binomial::{Count, Interval, fewest_without_failure, rule_of_three};
pub use order::{fewest_for_order_limit, order_limit};
pub use share::{BadShare, Share};
pub use tolerance::{one_sided_factor, two_sided_factor};
pub use tradeoff::{Point, Tradeoff};
