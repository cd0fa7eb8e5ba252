//! The `beltwright` program.

fn main() {}
