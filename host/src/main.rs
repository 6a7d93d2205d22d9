//! The command `donelight`.
fn main() {}
