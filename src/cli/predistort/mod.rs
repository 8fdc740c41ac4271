//! `quietedge predistort`: the table that undoes the stage, verified and written for a front end.

mod closed;
mod polynomial;
mod table;

use std::path::PathBuf;

use super::arguments::quantity;
use super::{Console, Disk, Ending, Failure, OutputFolder, OutputOptions};
use crate::input::Files;
use crate::predistort::{Table, TableRequest, c_header, csv, hex_image, json, npy};
use crate::report::check::Request;
use crate::report::predistort::{
    margin_figure, page, polynomial_csv, polynomial_document, predistort_document, spectra_figure,
    table_figure, text,
};
use crate::signal;
use crate::study::{
    PredistortRequest, PredistortResult, Predistortion, Reserve, Study, predistort,
};
use crate::units::Dimension;
use crate::verdict::Outcome;

use closed::CaptureOptions;
use polynomial::PolynomialOptions;
use table::TableOptions;

/// Make, verify and export a predistortion table. Exit code 0 where the limits are met behind it; of captures 0
/// while a further table helps, 1 where it has stopped helping
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge predistort my.study.toml --out table
      report.html, result.json, spectrum.png, table.png; table.csv, .json, .npy, .hex ($readmemh), .h (C)
  quietedge predistort my.study.toml --depth 64 --amplitude-bits 10 --phase-bits 8 --spacing power
  quietedge predistort my.study.toml --search --reserve \"3 dB\"
  quietedge predistort my.study.toml --polynomial memory
  quietedge predistort --from-capture sent.wav received.sigmf-meta --out pass1
  quietedge predistort my.study.toml --from-capture sent.wav received2.wav --previous pass1/table.json --out pass2
      the study gives limits, level, floor and range; its stage is not used
A study names the table afterwards: [predistort] table = \"table/table.json\"")]
pub struct Arguments {
    /// Study file (TOML); sizes that its [predistort] states are taken where no option says otherwise
    #[arg(required_unless_present = "from_capture")]
    study: Option<PathBuf>,

    #[command(flatten)]
    table: TableOptions,

    /// Search the smallest table that keeps every limit with the reserve
    #[arg(long, conflicts_with_all = ["depth", "address_bits", "amplitude_bits", "phase_bits"])]
    search: bool,

    /// Margin that a searched table must leave
    #[arg(long, value_name = "DB", default_value = "3 dB", requires = "search", value_parser = quantity(Dimension::Decibel))]
    reserve: f64,

    #[command(flatten)]
    polynomial: PolynomialOptions,

    #[command(flatten)]
    capture: CaptureOptions,

    #[command(flatten)]
    output: OutputOptions,
}

const NAMES: [&str; 12] = [
    "report.html",
    "result.json",
    "spectrum.png",
    "table.csv",
    "table.json",
    "table.npy",
    "table.hex",
    "table.h",
    "polynomial.json",
    "polynomial.csv",
    "table.png",
    "margin.png",
];

/// Parts of the progress bar.
const STEPS: u64 = 1000;

/// Runs the command.
///
/// # Errors
/// A study that cannot be read or carried out, a map without an inverse; files that cannot be written.
pub fn run(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    let folder = OutputFolder::claim_option(&arguments.output, &NAMES)?;
    if arguments.capture.is_given() {
        return closed::run(arguments, folder.as_ref(), console);
    }
    let path = arguments
        .study
        .as_ref()
        .ok_or_else(|| Failure::new("no study: name one, or captures with --from-capture"))?;
    let name = path
        .file_name()
        .unwrap_or_default()
        .to_string_lossy()
        .into_owned();
    let files = Disk::beside(path);
    let study = Study::read(&name, &files)?;
    let request = request(arguments, &study)?;
    let mut source = signal::open(&files, &study.signal.file, &study.signal.options)?;
    let bar = console.progress(STEPS, "predistorting");
    let result = predistort(&study, &request, &mut *source, &mut |part| {
        bar.set_position((part * STEPS as f64) as u64);
    });
    bar.finish_and_clear();
    let result = result?;
    console.print(&text(&result))?;
    console.print_json(&predistort_document(&result))?;
    if let Some(folder) = folder {
        let request = Request {
            command: format!("quietedge predistort {}", path.display()),
            inputs: inputs(&study, &files),
        };
        write(&folder, &result, &request)?;
        console.remark(&format!(
            "the report is in {}",
            folder.path(NAMES[0]).display()
        ));
    }
    let verdict = &result.after.judgement.verdict;
    match verdict.outcome {
        Outcome::Within => Ok(Ending::Within),
        Outcome::Outside => Ok(Ending::Outside),
        Outcome::Undecided => {
            let undecided = verdict
                .checks
                .iter()
                .filter(|check| check.outcome == Outcome::Undecided);
            let reasons: Vec<&str> = undecided.map(|check| check.reason.as_str()).collect();
            Err(Failure::new(format!("undecided: {}", reasons.join("; "))))
        }
    }
}

fn request(arguments: &Arguments, study: &Study) -> Result<PredistortRequest, Failure> {
    let base = match &study.predistort {
        Some(Predistortion::Request(request)) => *request,
        _ => TableRequest::default(),
    };
    let table = arguments.table.request(base)?;
    let polynomial = arguments.polynomial.request(table.rate)?;
    let search = arguments.search.then_some(Reserve {
        db: arguments.reserve,
    });
    Ok(PredistortRequest {
        table,
        search,
        polynomial,
    })
}

fn write(
    folder: &OutputFolder,
    result: &PredistortResult,
    request: &Request,
) -> Result<(), Failure> {
    let table = &result.table;
    folder.write(NAMES[0], page(result, request).html()?.as_bytes())?;
    folder.write(
        NAMES[1],
        &serde_json::to_vec_pretty(&predistort_document(result))?,
    )?;
    folder.write(NAMES[2], &spectra_figure(result).figure.png()?)?;
    write_table(folder, table)?;
    folder.write(NAMES[10], &table_figure(result).figure.png()?)?;
    if let Some(margin) = margin_figure(result) {
        folder.write(NAMES[11], &margin.figure.png()?)?;
    }
    if let Some(polynomial) = &result.polynomial
        && let (Some(document), Some(text)) =
            (polynomial_document(polynomial), polynomial_csv(polynomial))
    {
        folder.write(NAMES[8], &serde_json::to_vec_pretty(&document)?)?;
        folder.write(NAMES[9], text.as_bytes())?;
    }
    Ok(())
}

/// The table in every format.
fn write_table(folder: &OutputFolder, table: &Table) -> Result<(), Failure> {
    folder.write(NAMES[3], csv(table).as_bytes())?;
    folder.write(NAMES[4], &serde_json::to_vec_pretty(&json(table))?)?;
    folder.write(NAMES[5], &npy(table)?)?;
    folder.write(NAMES[6], hex_image(table).as_bytes())?;
    folder.write(NAMES[7], c_header(table).as_bytes())?;
    Ok(())
}

/// The text of the stage or map file that the study names.
fn inputs(study: &Study, files: &Disk) -> Vec<(String, String)> {
    let name = &study.hardware_file;
    files
        .text(name)
        .into_iter()
        .map(|text| (files.display(name), text))
        .collect()
}
