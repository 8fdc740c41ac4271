//! `quietedge compare`: schemes side by side.

use std::path::PathBuf;

use super::arguments::ByChoice;
use super::{Console, Disk, Ending, Failure, OutputFolder, OutputOptions};
use crate::input::Files;
use crate::report::check::Request;
use crate::report::compare::{document, page, spectrum_figures, text};
use crate::signal;
use crate::study::{Study, compare_by, ranked};
use crate::verdict::Outcome;

/// Schemes side by side, with and without static predistortion, ranked: exit code 0 where one is within limits, else 1
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge compare signals/tide-gauge-compare.study.toml
      one study with several [[scheme]] tables
  quietedge compare one.study.toml other.study.toml --out report
      several studies; writes compare.html, compare.json and pictures of the spectra into report/
  quietedge compare my.study.toml --by replay
      every stage integrated cycle by cycle
  quietedge compare my.study.toml --json | jq '.ranking[0].reason'")]
pub struct Arguments {
    /// Study files (TOML), each with one or more [[scheme]]
    #[arg(required = true)]
    studies: Vec<PathBuf>,

    /// What the output of each is taken from
    #[arg(long, value_enum, default_value_t)]
    by: ByChoice,

    /// How many schemes are worked on at a time; the result is the same for any number
    #[arg(long, default_value_t = 2, value_parser = clap::value_parser!(u8).range(1..=64))]
    threads: u8,

    #[command(flatten)]
    output: OutputOptions,
}

const NAMES: [&str; 4] = [
    "compare.html",
    "compare.json",
    "spectra.png",
    "spectra-predistorted.png",
];

/// Parts of the progress bar.
const STEPS: u64 = 1000;

/// Runs the command.
///
/// # Errors
/// A study that cannot be read or carried out; files that cannot be written.
pub fn run(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    let folder = OutputFolder::claim_option(&arguments.output, &NAMES)?;
    let (mut studies, mut disks, mut inputs) = (Vec::new(), Vec::new(), Vec::new());
    for path in &arguments.studies {
        let name = path.file_name().unwrap_or_default().to_string_lossy();
        let disk = Disk::beside(path);
        let read = Study::read_all(&name, &disk)?;
        if let Some(first) = read.first() {
            inputs.push((disk.display(&name), first.text.clone()));
        }
        for study in read {
            studies.push(study);
            disks.push(Disk::beside(path));
        }
    }
    let bar = console.progress(STEPS, "comparing");
    let results = compare_by(
        &studies,
        arguments.by.by(),
        usize::from(arguments.threads),
        &|index| {
            let choice = &studies[index].signal;
            Ok(signal::open(&disks[index], &choice.file, &choice.options)?)
        },
        &|part| bar.set_position((part * STEPS as f64) as u64),
    );
    bar.finish_and_clear();
    let results = results.map_err(|(index, error)| {
        let scheme = studies[index].scheme.name();
        Failure::new(format!("scheme {} ({scheme}): {error}", index + 1))
    })?;
    let ranks = ranked(&results);
    console.print(&text(&results, &ranks))?;
    console.print_json(&document(&results, &ranks))?;
    if let Some(folder) = folder {
        let shown: Vec<String> = arguments
            .studies
            .iter()
            .map(|path| path.display().to_string())
            .collect();
        let request = Request {
            command: format!(
                "quietedge compare {}{}",
                shown.join(" "),
                arguments.by.option()
            ),
            inputs,
        };
        let html = page(&results, &ranks, &request).html()?;
        folder.write(NAMES[0], html.as_bytes())?;
        let json = serde_json::to_vec_pretty(&document(&results, &ranks))?;
        folder.write(NAMES[1], &json)?;
        for (name, figure) in NAMES[2..].iter().zip(spectrum_figures(&results)) {
            folder.write(name, &figure.figure.png()?)?;
        }
        let report = folder.path(NAMES[0]);
        console.remark(&format!("the report is in {}", report.display()));
    }
    let outcomes: Vec<Outcome> = results
        .iter()
        .map(|compared| compared.result.judgement.verdict.outcome)
        .collect();
    if outcomes.contains(&Outcome::Within) {
        Ok(Ending::Within)
    } else if outcomes.contains(&Outcome::Undecided) {
        Err(Failure::new(
            "undecided: no scheme is within limits, and at least one could not be decided",
        ))
    } else {
        Ok(Ending::Outside)
    }
}
