//! The `plant` command.
fn main() {}
