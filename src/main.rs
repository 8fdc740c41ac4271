//! The command line of `quietedge`.

use std::process::ExitCode;

fn main() -> ExitCode {
    quietedge::cli::main()
}
