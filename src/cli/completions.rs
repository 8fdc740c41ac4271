//! `quietedge completions`: what a shell needs to complete the command line.

use clap::CommandFactory;
use clap_complete::Shell;

use super::{Console, Ending, Failure};

/// Print the completion script of a shell
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge completions bash > ~/.local/share/bash-completion/completions/quietedge
  quietedge completions zsh > ~/.zfunc/_quietedge
  quietedge completions fish > ~/.config/fish/completions/quietedge.fish")]
pub struct Arguments {
    /// The shell
    shell: Shell,
}

/// Runs the command.
///
/// # Errors
/// A closed or full stdout; `--json`, which no shell reads.
pub fn run(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    if console.wants_json() {
        return Err(Failure::new(
            "--json: given with completions; allowed: a script for a shell, which is no JSON",
        ));
    }
    let mut script = Vec::new();
    let mut command = super::Arguments::command();
    clap_complete::generate(arguments.shell, &mut command, "quietedge", &mut script);
    console.print(String::from_utf8_lossy(&script).trim_end())?;
    Ok(Ending::Within)
}
