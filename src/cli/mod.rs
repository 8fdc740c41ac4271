//! The command line: the only module that opens files, reads the environment or prints.

mod arguments;
mod check;
mod compare;
mod completions;
mod console;
mod design;
mod disk;
mod limits;
mod map;
mod measure;
mod output;
mod predistort;
mod ratings;
mod signal;
mod solve;

use std::ffi::OsString;
use std::process::ExitCode;

use clap::{Parser, Subcommand};

pub use console::{Console, Ending, Failure};
pub use disk::Disk;
pub use output::{OutputFolder, OutputOptions};

/// The bench of an engineer who puts an amplitude-varying signal through a switching power stage.
#[derive(Debug, Parser)]
#[command(name = "quietedge", version, about, long_about = None, max_term_width = 100)]
#[command(
    after_help = "Start with `quietedge check`: it carries out a built-in study and writes its report.
quietedge COMMAND --help shows the options of a command, with examples."
)]
struct Arguments {
    #[command(subcommand)]
    command: Command,

    #[command(flatten)]
    common: Common,
}

/// Options that every command takes.
#[derive(Debug, Clone, clap::Args)]
#[command(next_help_heading = "For every command")]
pub struct Common {
    /// Print one JSON document on stdout and nothing else there
    #[arg(long, global = true)]
    json: bool,

    /// Keep progress bars and remarks off stderr; errors still go there
    #[arg(short, long, global = true)]
    quiet: bool,
}

#[derive(Debug, Subcommand)]
enum Command {
    Check(check::Arguments),
    Compare(compare::Arguments),
    Design(Box<design::Arguments>),
    Solve(solve::Arguments),
    Map(Box<map::Arguments>),
    Predistort(predistort::Arguments),
    Measure(Box<measure::Arguments>),
    Signal(signal::Arguments),
    Limits(limits::Arguments),
    Completions(completions::Arguments),
}

/// Runs the program with the process's own arguments.
pub fn main() -> ExitCode {
    run(std::env::args_os())
}

fn run(arguments: impl IntoIterator<Item = OsString>) -> ExitCode {
    let arguments = match Arguments::try_parse_from(arguments) {
        Ok(arguments) => arguments,
        Err(error) => {
            // Help and version go to stdout and are no failure.
            let code = if error.use_stderr() { 2 } else { 0 };
            let _ = error.print();
            return ExitCode::from(code);
        }
    };
    let console = Console::new(&arguments.common);
    let result = match arguments.command {
        Command::Check(arguments) => check::run(&arguments, &console),
        Command::Compare(arguments) => compare::run(&arguments, &console),
        Command::Design(arguments) => design::run(&arguments, &console),
        Command::Solve(arguments) => solve::run(&arguments, &console),
        Command::Map(arguments) => map::run(&arguments, &console),
        Command::Predistort(arguments) => predistort::run(&arguments, &console),
        Command::Measure(arguments) => measure::run(&arguments, &console),
        Command::Signal(arguments) => signal::run(&arguments, &console),
        Command::Limits(arguments) => limits::run(&arguments, &console),
        Command::Completions(arguments) => completions::run(&arguments, &console),
    };
    console.exit(result)
}
