//! Counters of everything that did not go as planned.
