//! Leat.
fn main() {}
