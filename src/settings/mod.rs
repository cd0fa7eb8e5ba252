//! The settings file: fields, defaults, ranges, and the checks between keys.
//!
//! ```text
//! text ──> source ──> walk ──────────> serde ──────> between ──> Loaded
//!          lines      every key       Settings      keys that
//!                     against the                   contradict
//!                     schema                        each other
//! ```
//!
//! The structs in `fields` are the one place for names, types, ranges and words: the editor schema is made from them,
//! and the walk checks a file against that same schema. Everything that is derived from the settings (sizes in px,
//! the point of decision, lead times) is a method of [`Settings`] or [`Line`].

mod between;
mod derived;
mod fields;
mod load;
mod part;
mod problem;
mod schema;
mod source;
mod walk;

#[cfg(test)]
mod tests;

pub use derived::{Geometry, Reach, SWITCH_BYTES, UNSEEN_STEP_MM};
pub use fields::*;
pub use load::{Loaded, load, parse};
pub use part::PartSize;
pub use problem::{Problem, Problems, SettingsError};
pub use schema::{schema, schema_text};
