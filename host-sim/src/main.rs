//! The `hedgerow` program: parse, dispatch, map errors to exit codes.
fn main() {}
