//! `quietedge predistort`: the table that undoes the stage, verified and written for a front end.

use std::path::PathBuf;

use super::arguments::quantity;
use super::{Console, Disk, Ending, Failure, OutputFolder, OutputOptions};
use crate::drive::{Between, LookupSize, MAX_TABLE_RATE, Spacing};
use crate::input::Files;
use crate::predistort::{
    BelowFloor, DEFAULT_MU, Form, PolynomialRequest, PolynomialSize, TableRequest, c_header, csv,
    hex_image, json, npy,
};
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

/// Make, verify and export a predistortion table. Exit code 0 where the limits are met behind it
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge predistort my.study.toml --out table
      report.html, result.json, spectrum.png, table.png; table.csv, .json, .npy, .hex ($readmemh), .h (C)
  quietedge predistort my.study.toml --depth 64 --amplitude-bits 10 --phase-bits 8 --spacing power
  quietedge predistort my.study.toml --search --reserve \"3 dB\"
  quietedge predistort my.study.toml --polynomial memory
A study names the table afterwards: [predistort] table = \"table/table.json\"")]
pub struct Arguments {
    /// Study file (TOML); sizes that its [predistort] states are taken where no option says otherwise
    study: PathBuf,

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
    output: OutputOptions,
}

#[derive(Debug, clap::Args)]
struct TableOptions {
    /// Entries, 2 to 65536 [default: 256]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u32).range(LookupSize::DEPTHS.0 as i64..=LookupSize::DEPTHS.1 as i64))]
    depth: Option<u32>,

    /// Bits of the address [default: enough to name the entries, 6 more and at least 14 with interpolation]
    #[arg(long, value_name = "BITS", value_parser = bits())]
    address_bits: Option<u32>,

    /// Bits of the control's words [default: 12]
    #[arg(long, value_name = "BITS", value_parser = bits())]
    amplitude_bits: Option<u32>,

    /// Bits of the phase's words, over one turn [default: 12]
    #[arg(long, value_name = "BITS", value_parser = bits())]
    phase_bits: Option<u32>,

    /// How the addresses are spread
    #[arg(long, value_enum)]
    spacing: Option<SpacingWord>,

    /// Parameter of the companding p = ln(1 + mu m) / ln(1 + mu) [default: 255]
    #[arg(long, value_name = "MU")]
    mu: Option<f64>,

    /// The nearest entry counts; without this, straight lines between entries
    #[arg(long)]
    no_interpolation: bool,

    /// Rate of table and polynomial in times the signal's: 1, 2, 4, ... 64 [default: 16]
    #[arg(long, value_name = "TIMES")]
    rate: Option<usize>,

    /// Where the scheme has a floor: follow its shaping, or be exact down to the floor and held there
    #[arg(long, value_enum)]
    below_floor: Option<BelowFloorWord>,

    /// Output amplitude at the last entry, peak volts [default: the highest the map reaches]
    #[arg(long, value_name = "VOLTS", value_parser = quantity(Dimension::Voltage))]
    full_output: Option<f64>,
}

#[derive(Debug, clap::Args)]
struct PolynomialOptions {
    /// Learn a polynomial with memory as well and hold it against the table
    #[arg(long, value_enum, value_name = "FORM")]
    polynomial: Option<FormWord>,

    /// Highest power of the envelope; with --lags, or both chosen by cross-validation
    #[arg(long, value_name = "K", requires_all = ["polynomial", "lags"], value_parser = clap::value_parser!(u32).range(0..=PolynomialSize::HIGHEST.0 as i64))]
    power: Option<u32>,

    /// Longest lag of the signal, samples at --rate
    #[arg(long, value_name = "M", requires_all = ["polynomial", "power"], value_parser = clap::value_parser!(u32).range(0..=PolynomialSize::HIGHEST.1 as i64))]
    lags: Option<u32>,

    /// Farthest cross term, samples at --rate
    #[arg(long, value_name = "L", requires = "power", default_value_t = 1, value_parser = clap::value_parser!(u32).range(1..=PolynomialSize::HIGHEST.2 as i64))]
    cross: u32,

    /// Most passes of learning
    #[arg(long, value_name = "N", default_value_t = 6, value_parser = clap::value_parser!(u32).range(1..=50))]
    passes: u32,

    /// Ridge of the least squares, against columns of norm one; 0 for none
    #[arg(long, value_name = "R", default_value_t = 1e-11)]
    ridge: f64,
}

fn bits() -> clap::builder::RangedI64ValueParser<u32> {
    clap::value_parser!(u32).range(i64::from(LookupSize::BITS.0)..=i64::from(LookupSize::BITS.1))
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
enum SpacingWord {
    /// Evenly in magnitude
    Magnitude,
    /// Evenly in power
    Power,
    /// Dense at the bottom, by the mu-law
    Companded,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
enum BelowFloorWord {
    /// Follow the scheme's shaping
    Shaped,
    /// Exact down to the floor
    Held,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
enum FormWord {
    /// Signal and envelope lag alike
    Memory,
    /// Cross terms of signal and envelope as well
    Cross,
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
    let name = arguments
        .study
        .file_name()
        .unwrap_or_default()
        .to_string_lossy()
        .into_owned();
    let files = Disk::beside(&arguments.study);
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
            command: format!("quietedge predistort {}", arguments.study.display()),
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
    let table = table_request(&arguments.table, base)?;
    let options = &arguments.polynomial;
    if !(options.ridge >= 0.0 && options.ridge.is_finite()) {
        return Err(Failure::new(format!(
            "--ridge {}: 0 or more is allowed",
            options.ridge
        )));
    }
    let polynomial = options.polynomial.map(|word| {
        let form = match word {
            FormWord::Memory => Form::Memory,
            FormWord::Cross => Form::Cross,
        };
        let size = options
            .power
            .zip(options.lags)
            .map(|(power, lags)| PolynomialSize {
                form,
                power,
                memory: lags as usize,
                cross: options.cross as usize,
            });
        PolynomialRequest {
            form,
            size,
            passes: options.passes as usize,
            ridge: options.ridge,
            rate: table.rate,
        }
    });
    let search = arguments.search.then_some(Reserve {
        db: arguments.reserve,
    });
    Ok(PredistortRequest {
        table,
        search,
        polynomial,
    })
}

fn table_request(options: &TableOptions, base: TableRequest) -> Result<TableRequest, Failure> {
    let mut request = base;
    if options.no_interpolation {
        request.between = Between::Nearest;
    }
    if let Some(depth) = options.depth {
        request.size.depth = depth as usize;
    }
    request.size.address_bits = match options.address_bits {
        Some(bits) => bits,
        // The study's own stay where nothing that they hang on was changed.
        None if options.depth.is_none() && !options.no_interpolation => base.size.address_bits,
        None => TableRequest::address_bits_for(request.size.depth, request.between),
    };
    request.size.amplitude_bits = options.amplitude_bits.unwrap_or(base.size.amplitude_bits);
    request.size.phase_bits = options.phase_bits.unwrap_or(base.size.phase_bits);
    request.spacing = match (options.spacing, options.mu) {
        (None, None) => base.spacing,
        (Some(SpacingWord::Companded), mu) => Spacing::Companded {
            mu: mu.unwrap_or(DEFAULT_MU),
        },
        (Some(SpacingWord::Magnitude), None) => Spacing::Magnitude,
        (Some(SpacingWord::Power), None) => Spacing::Power,
        (_, Some(mu)) => {
            return Err(Failure::new(format!(
                "--mu {mu}: only beside --spacing companded"
            )));
        }
    };
    if let Some(rate) = options.rate {
        if !rate.is_power_of_two() || rate > MAX_TABLE_RATE {
            return Err(Failure::new(format!(
                "--rate {rate}: a power of two up to {MAX_TABLE_RATE} is allowed"
            )));
        }
        request.rate = rate;
    }
    request.below_floor = match options.below_floor {
        None => base.below_floor,
        Some(BelowFloorWord::Shaped) => BelowFloor::Shaped,
        Some(BelowFloorWord::Held) => BelowFloor::Held,
    };
    if let Some(full_output_v) = options.full_output {
        if full_output_v <= 0.0 {
            return Err(Failure::new("--full-output: more than 0 V is allowed"));
        }
        request.full_output_v = Some(full_output_v);
    }
    Ok(request)
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
    folder.write(NAMES[3], csv(table).as_bytes())?;
    folder.write(NAMES[4], &serde_json::to_vec_pretty(&json(table))?)?;
    folder.write(NAMES[5], &npy(table)?)?;
    folder.write(NAMES[6], hex_image(table).as_bytes())?;
    folder.write(NAMES[7], c_header(table).as_bytes())?;
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

/// The text of the stage or map file that the study names.
fn inputs(study: &Study, files: &Disk) -> Vec<(String, String)> {
    let name = &study.hardware_file;
    files
        .text(name)
        .into_iter()
        .map(|text| (files.display(name), text))
        .collect()
}
