//! The `holdtrue` command.
fn main() {}
