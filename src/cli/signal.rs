//! `quietedge signal`.

use super::Ending;
use super::{Console, Failure};

/// To be written.
#[derive(Debug, clap::Args)]
pub struct Arguments {}

/// Runs the command.
pub fn run(_arguments: &Arguments, _console: &Console) -> Result<Ending, Failure> {
    Err(Failure::new("not written yet"))
}
