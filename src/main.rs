//! Parses arguments, calls one function, gives the exit code.
fn main() {}
