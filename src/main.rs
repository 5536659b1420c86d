//! Parses arguments, calls one function, gives the exit status.

use aforesaid::world::RealWorld;
use std::process::ExitCode;

fn main() -> ExitCode {
    ExitCode::from(aforesaid::cli::main(&RealWorld, std::env::args_os().skip(1).collect()))
}
