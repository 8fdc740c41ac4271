//! What reaches the terminal: results on stdout, remarks and failures on stderr, exit codes.

use std::fmt;
use std::io::{self, Write};
use std::process::ExitCode;

use indicatif::{ProgressBar, ProgressStyle};

use super::Common;

/// A reason to stop, as one text for a person. Exit code 2.
#[derive(Debug)]
pub struct Failure(String);

impl<E: std::error::Error> From<E> for Failure {
    fn from(error: E) -> Self {
        let mut text = error.to_string();
        let mut source = error.source();
        while let Some(cause) = source {
            let cause_text = cause.to_string();
            if !text.contains(&cause_text) {
                text = format!("{text}: {cause_text}");
            }
            source = cause.source();
        }
        Self(text)
    }
}

impl Failure {
    /// A failure in words.
    pub fn new(text: impl Into<String>) -> Self {
        Self(text.into())
    }
}

impl fmt::Display for Failure {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0)
    }
}

/// How a command ended when it did not fail.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Ending {
    /// Done, or within limits: exit code 0.
    Within,
    /// Outside limits: exit code 1.
    Outside,
    /// Could not decide: exit code 2.
    Undecided,
}

/// The terminal, as the common options ask for it.
#[derive(Debug)]
pub struct Console {
    json: bool,
    quiet: bool,
}

impl Console {
    /// A console that follows `common`.
    pub fn new(common: &Common) -> Self {
        Self {
            json: common.json,
            quiet: common.quiet,
        }
    }

    /// True where stdout carries one JSON document.
    pub fn wants_json(&self) -> bool {
        self.json
    }

    /// Prints a result for people on stdout; nothing with `--json`.
    ///
    /// # Errors
    /// A closed or full stdout.
    pub fn print(&self, text: &str) -> Result<(), Failure> {
        if self.json {
            Ok(())
        } else {
            write_stdout(text)
        }
    }

    /// Prints the result for programs on stdout; nothing without `--json`.
    ///
    /// # Errors
    /// A closed or full stdout.
    pub fn print_json(&self, document: &impl serde::Serialize) -> Result<(), Failure> {
        if !self.json {
            return Ok(());
        }
        write_stdout(&serde_json::to_string_pretty(document)?)
    }

    /// Says something in passing on stderr; nothing with `--quiet`.
    pub fn remark(&self, text: &str) {
        if !self.quiet {
            let _ = writeln!(io::stderr(), "{text}");
        }
    }

    /// A progress bar over `steps`, shown on a terminal only.
    pub fn progress(&self, steps: u64, what: &'static str) -> ProgressBar {
        if self.quiet {
            return ProgressBar::hidden();
        }
        let style = ProgressStyle::with_template("{msg:<12} {wide_bar} {percent:>3} %  {eta} left")
            .unwrap_or_else(|_| ProgressStyle::default_bar());
        ProgressBar::new(steps).with_style(style).with_message(what)
    }

    /// The exit code of `result`; a failure is told on stderr.
    pub fn exit(&self, result: Result<Ending, Failure>) -> ExitCode {
        match result {
            Ok(Ending::Within) => ExitCode::from(0),
            Ok(Ending::Outside) => ExitCode::from(1),
            Ok(Ending::Undecided) => ExitCode::from(2),
            Err(failure) => {
                let _ = writeln!(io::stderr(), "quietedge: {failure}");
                ExitCode::from(2)
            }
        }
    }
}

/// Writes a line; a reader that closed early (such as `head`) is no failure.
fn write_stdout(text: &str) -> Result<(), Failure> {
    match writeln!(io::stdout().lock(), "{text}") {
        Err(error) if error.kind() != io::ErrorKind::BrokenPipe => {
            Err(Failure::new(format!("writing to stdout failed: {error}")))
        }
        _ => Ok(()),
    }
}
