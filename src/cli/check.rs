//! `quietedge check`: the main job.

use std::path::{Path, PathBuf};

use super::arguments::ByChoice;
use super::{Console, Disk, Ending, Failure, OutputFolder, OutputOptions};
use crate::input::Files;
use crate::report::check::{Request, page, spectrum_figure, text};
use crate::report::documents::{check_document, map_csv};
use crate::report::gate::{gate_csv, gate_vcd};
use crate::signal;
use crate::study::{BuiltIn, By, CheckResult, DEFAULT_STUDY, Study, StudyError, check_by};
use crate::verdict::Outcome;

/// Hold the output of a study against its limits: exit code 0 within, 1 outside, 2 undecided
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge check
      the built-in study; its report goes to quietedge-report/, made anew each time
  quietedge check my.study.toml --out report
      writes report.html, result.json, spectrum.png and map.csv into report/, and of a burst scheme
      its gate as gate.csv and gate.vcd
  quietedge check my.study.toml --by both
      integrates the stage cycle by cycle and says whether its map may be trusted
  quietedge check my.study.toml --json | jq .verdict.outcome")]
pub struct Arguments {
    /// Study file (TOML); the built-in one where absent
    study: Option<PathBuf>,

    /// What the output is taken from
    #[arg(long, value_enum, default_value_t)]
    by: ByChoice,

    /// Segments of a replay worked on at a time; the result is the same for any number to 1e-9
    #[arg(long, default_value_t = 2, value_parser = clap::value_parser!(u8).range(1..=64))]
    threads: u8,

    #[command(flatten)]
    output: OutputOptions,
}

/// Where the report of the built-in study goes without `--out`; made anew each time.
const BUILT_IN_FOLDER: &str = "quietedge-report";

const NAMES: [&str; 6] = [
    "report.html",
    "result.json",
    "spectrum.png",
    "map.csv",
    "gate.csv",
    "gate.vcd",
];

/// Parts of the progress bar.
const STEPS: u64 = 1000;

/// Runs the command.
///
/// # Errors
/// A study that cannot be read or carried out; files that cannot be written.
pub fn run(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    let folder = match (&arguments.study, &arguments.output.out) {
        (None, None) => Some(OutputFolder::claim(
            Path::new(BUILT_IN_FOLDER),
            true,
            &NAMES,
        )?),
        _ => OutputFolder::claim_option(&arguments.output, &NAMES)?,
    };
    let (name, files): (String, Box<dyn Files>) = match &arguments.study {
        None => (DEFAULT_STUDY.to_owned(), Box::new(BuiltIn)),
        Some(path) => {
            let name = path
                .file_name()
                .unwrap_or_default()
                .to_string_lossy()
                .into_owned();
            (name, Box::new(Disk::beside(path)))
        }
    };
    let study = Study::read(&name, &*files)?;
    let result = carry_out(&study, &*files, arguments, console).map_err(|error| {
        let culprit = match &error {
            StudyError::Network(_) | StudyError::Orbit(_) | StudyError::Sweep(_) => {
                &study.hardware_file
            }
            StudyError::SignalTooShort { .. } | StudyError::SilentSignal => &study.signal.file,
            StudyError::Spectrum(_) | StudyError::Pair(_) | StudyError::NoWorkingPoint { .. } => {
                &name
            }
            // These name their file themselves.
            _ => return Failure::from(error),
        };
        Failure::new(format!("{}: {error}", files.display(culprit)))
    })?;
    console.print(&text(&result))?;
    console.print_json(&check_document(&result))?;
    if let Some(folder) = folder {
        let request = Request {
            command: command_line(arguments),
            inputs: inputs(&study, &*files),
        };
        write(&folder, &result, &request)?;
        let report = folder.path(NAMES[0]);
        console.remark(&format!("the report is in {}", report.display()));
    }
    let outcome = result.judgement.verdict.outcome;
    if outcome == Outcome::Undecided {
        let reasons: Vec<&str> = result
            .judgement
            .verdict
            .checks
            .iter()
            .filter(|check| check.outcome == Outcome::Undecided)
            .map(|check| check.reason.as_str())
            .collect();
        return Err(Failure::new(format!("undecided: {}", reasons.join("; "))));
    }
    Ok(if outcome == Outcome::Within {
        Ending::Within
    } else {
        Ending::Outside
    })
}

fn carry_out(
    study: &Study,
    files: &dyn Files,
    arguments: &Arguments,
    console: &Console,
) -> Result<CheckResult, StudyError> {
    let mut source = signal::open(files, &study.signal.file, &study.signal.options)?;
    let by = arguments.by.by();
    let (what, threads) = match by {
        By::Map => ("checking", 1),
        By::Replay | By::Both => ("replaying", usize::from(arguments.threads)),
    };
    let bar = console.progress(STEPS, what);
    // The rate of a replay, from the carrier cycles that the signal lasts.
    let cycles = source.len().map_or(0.0, |samples| {
        samples as f64 / source.rate_hz() * study.hardware.frequency_hz()
    });
    let start = std::time::Instant::now();
    let result = check_by(study, &mut *source, by, threads, &mut |part| {
        bar.set_position((part * STEPS as f64) as u64);
        let seconds = start.elapsed().as_secs_f64();
        if by != By::Map && cycles > 0.0 && seconds > 1.0 {
            let rate = 1e-6 * part * cycles / seconds;
            bar.set_message(format!("{what}, {rate:.1} million cycles/s"));
        }
    });
    bar.finish_and_clear();
    result
}

fn write(folder: &OutputFolder, result: &CheckResult, request: &Request) -> Result<(), Failure> {
    folder.write(NAMES[0], page(result, request).html()?.as_bytes())?;
    folder.write(
        NAMES[1],
        &serde_json::to_vec_pretty(&check_document(result))?,
    )?;
    folder.write(NAMES[2], &spectrum_figure(result).figure.png()?)?;
    folder.write(
        NAMES[3],
        map_csv(&result.study.title, &result.map).as_bytes(),
    )?;
    if let Some(train) = &result.gate {
        folder.write(NAMES[4], gate_csv(train).as_bytes())?;
        folder.write(NAMES[5], &gate_vcd(train)?)?;
    }
    Ok(())
}

fn command_line(arguments: &Arguments) -> String {
    let study = match &arguments.study {
        None => String::new(),
        Some(study) => format!(" {}", study.display()),
    };
    format!("quietedge check{study}{}", arguments.by.option())
}

/// The text of the stage or map file that the study names.
fn inputs(study: &Study, files: &dyn Files) -> Vec<(String, String)> {
    let name = &study.hardware_file;
    files
        .text(name)
        .into_iter()
        .map(|text| (files.display(name), text))
        .collect()
}
