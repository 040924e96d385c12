//! The `backlit` program.
fn main() {}
