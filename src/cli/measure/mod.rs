//! `quietedge measure`: a captured signal, with or without the one that was sent.

mod format;
mod limits;

use std::path::{Path, PathBuf};

use super::arguments::quantity;
use super::{Console, Disk, Ending, Failure, OutputFolder, OutputOptions};
use crate::math::Window;
use crate::metrics::Repeat;
use crate::report::check::Request;
use crate::report::measure::{
    measure_document, measure_page, measure_text, measured_spectrum_figure,
};
use crate::signal::{self, Format, FormatOptions, Source};
use crate::study::{MeasureRequest, MeasureResult, Scale, Study, measure};
use crate::units::{Dimension, watt_from_dbm};
use crate::verdict::Outcome;

use format::SymbolOptions;

/// Measure a captured signal; against the sent one, and against limits. Exit code 0 without limits or within,
/// 1 outside, 2 undecided
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge measure capture.cf32 --rate \"2 MHz\"                   spectrum, PAPR, CCDF, occupied bandwidth
  quietedge measure capture.sigmf-meta --reference sent.wav       and delay, rate, frequency, EVM, AM-AM, AM-PM
  quietedge measure capture.wav --reference sent.wav --study my.study.toml    held against the study's limits
  quietedge measure c.wav --limits fcc_90_210_mask_d --authorized-bandwidth \"20 kHz\" --full-scale \"37 dBm\"")]
pub struct Arguments {
    /// The capture: .wav, .csv, .cf32, .ci16, .npy or .sigmf-meta
    file: PathBuf,

    /// The signal that was sent, in any of these formats and at any rate
    #[arg(long, value_name = "FILE")]
    reference: Option<PathBuf>,

    /// A study whose limits and [signal.format] count where no option says otherwise
    #[arg(long, value_name = "STUDY")]
    study: Option<PathBuf>,

    /// Sample rate of the capture, where its file does not hold it
    #[arg(long, value_name = "HZ", value_parser = quantity(Dimension::Frequency))]
    rate: Option<f64>,

    /// Sample rate of the reference, where its file does not hold it
    #[arg(long, value_name = "HZ", value_parser = quantity(Dimension::Frequency))]
    reference_rate: Option<f64>,

    /// Format of the capture, where its extension does not say it
    #[arg(long, value_name = "FORMAT", value_parser = format)]
    format: Option<Format>,

    /// Whether the reference was sent over and over; where it is shorter than the capture by default
    #[arg(long, value_enum, default_value = "auto")]
    repeats: RepeatChoice,

    /// A limit set by name, or a file of sets (.toml); may be repeated
    #[arg(long, value_name = "SET|FILE")]
    limits: Vec<String>,

    /// Highest RMS EVM
    #[arg(long, value_name = "PERCENT", value_parser = percent)]
    evm_limit: Option<f64>,

    /// Channel width; also the band of the EVM
    #[arg(long, value_name = "WIDTH", value_parser = quantity(Dimension::Frequency))]
    channel: Option<f64>,

    /// Authorized bandwidth, for masks that count in it
    #[arg(long, value_name = "WIDTH", value_parser = quantity(Dimension::Frequency))]
    authorized_bandwidth: Option<f64>,

    /// Class of equipment, for sets that tell classes apart; may be repeated
    #[arg(long, value_name = "WORD")]
    class: Vec<String>,

    /// Modulation as a limit set calls it
    #[arg(long, value_name = "NAME")]
    limit_modulation: Option<String>,

    /// Power of a constant magnitude of 1.0: "37 dBm", "5 W"
    #[arg(long, value_name = "POWER", value_parser = quantity(Dimension::Level), conflicts_with = "load_resistance")]
    full_scale: Option<f64>,

    /// The file holds peak volts over this load
    #[arg(long, value_name = "OHM", value_parser = quantity(Dimension::Resistance))]
    load_resistance: Option<f64>,

    /// Full width in which the waveform's EVM is taken
    #[arg(long, value_name = "WIDTH", value_parser = quantity(Dimension::Frequency))]
    band: Option<f64>,

    /// Resolution of the spectrum, at least as fine as the limits need
    #[arg(long, value_name = "HZ", value_parser = quantity(Dimension::Frequency))]
    resolution: Option<f64>,

    #[command(flatten)]
    symbols: SymbolOptions,

    #[command(flatten)]
    output: OutputOptions,
}

#[derive(Debug, Clone, Copy, clap::ValueEnum)]
enum RepeatChoice {
    Auto,
    Yes,
    No,
}

const NAMES: [&str; 3] = ["report.html", "result.json", "spectrum.png"];

/// Parts of the progress bar.
const STEPS: u64 = 1000;

/// Runs the command.
///
/// # Errors
/// Files that cannot be read or written, streams that cannot be compared.
pub fn run(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    let request = request(arguments)?;
    let folder = OutputFolder::claim_option(&arguments.output, &NAMES)?;
    let options = |rate_hz, format| FormatOptions {
        format,
        rate_hz,
        full_scale: None,
    };
    let mut capture = open(&arguments.file, &options(arguments.rate, arguments.format))?;
    let mut reference = match &arguments.reference {
        Some(path) => Some(open(path, &options(arguments.reference_rate, None))?),
        None => None,
    };
    let bar = console.progress(STEPS, "measuring");
    let result = measure(
        &request,
        &mut *capture,
        reference
            .as_mut()
            .map(|source| &mut **source as &mut dyn Source),
        &mut |part| bar.set_position((part * STEPS as f64) as u64),
    );
    bar.finish_and_clear();
    let result = result?;
    console.print(&measure_text(&result))?;
    console.print_json(&measure_document(&result))?;
    if let Some(folder) = folder {
        write(&folder, &result, arguments)?;
        console.remark(&format!(
            "the report is in {}",
            folder.path(NAMES[0]).display()
        ));
    }
    if request.limits.is_empty() {
        return Ok(Ending::Within);
    }
    let verdict = &result.judgement.verdict;
    match verdict.outcome {
        Outcome::Within => Ok(Ending::Within),
        Outcome::Outside => Ok(Ending::Outside),
        Outcome::Undecided => {
            let reasons: Vec<&str> = verdict
                .checks
                .iter()
                .filter(|check| check.outcome == Outcome::Undecided)
                .map(|check| check.reason.as_str())
                .collect();
            Err(Failure::new(format!("undecided: {}", reasons.join("; "))))
        }
    }
}

/// `5` and `5 %` are the same.
fn percent(text: &str) -> Result<f64, String> {
    text.trim()
        .trim_end_matches('%')
        .trim()
        .parse()
        .ok()
        .filter(|percent: &f64| *percent > 0.0 && percent.is_finite())
        .ok_or_else(|| "allowed: a percentage above 0, such as \"5 %\"".to_owned())
}

fn format(text: &str) -> Result<Format, String> {
    let words: Vec<&str> = Format::ALL.iter().map(|(name, _)| *name).collect();
    Format::ALL
        .iter()
        .find(|(name, _)| *name == text)
        .map(|(_, format)| *format)
        .ok_or_else(|| format!("allowed: {}", words.join(", ")))
}

fn open(path: &Path, options: &FormatOptions) -> Result<Box<dyn Source>, Failure> {
    let name = path
        .file_name()
        .and_then(|name| name.to_str())
        .ok_or_else(|| Failure::new(format!("{}: not the name of a file", path.display())))?;
    Ok(signal::open(&Disk::beside(path), name, options)?)
}

fn request(arguments: &Arguments) -> Result<MeasureRequest, Failure> {
    for (option, value) in [
        ("--channel", arguments.channel),
        ("--authorized-bandwidth", arguments.authorized_bandwidth),
        ("--band", arguments.band),
        ("--resolution", arguments.resolution),
        ("--load-resistance", arguments.load_resistance),
    ] {
        if value.is_some_and(|value| !(value > 0.0 && value.is_finite())) {
            return Err(Failure::new(format!(
                "{option}: given {}; allowed: a number above 0",
                value.unwrap_or(0.0)
            )));
        }
    }
    let study = match &arguments.study {
        None => None,
        Some(path) => {
            let name = path.file_name().unwrap_or_default().to_string_lossy();
            Some(Study::read(&name, &Disk::beside(path))?)
        }
    };
    let format = match (arguments.symbols.format()?, &study) {
        (None, Some(study)) => study.signal.format,
        (given, _) => given,
    };
    let shown = |path: &PathBuf| path.display().to_string();
    Ok(MeasureRequest {
        file: shown(&arguments.file),
        reference: arguments.reference.as_ref().map(shown),
        repeat: match arguments.repeats {
            RepeatChoice::Auto => Repeat::Auto,
            RepeatChoice::Yes => Repeat::Yes,
            RepeatChoice::No => Repeat::No,
        },
        limits: limits::limits(arguments, study.as_ref())?,
        scale: match (arguments.full_scale, arguments.load_resistance) {
            (Some(dbm), _) => Scale::FullScale {
                full_scale_w: watt_from_dbm(dbm),
            },
            (None, Some(load_ohm)) => Scale::Volts { load_ohm },
            (None, None) => Scale::Unknown,
        },
        window: study
            .as_ref()
            .map_or(Window::BlackmanHarris, |study| study.window),
        resolution_hz: arguments
            .resolution
            .or(study.as_ref().and_then(|study| study.resolution_hz)),
        band_hz: arguments.band,
        format,
    })
}

fn write(
    folder: &OutputFolder,
    result: &MeasureResult,
    arguments: &Arguments,
) -> Result<(), Failure> {
    let request = Request {
        command: command_line(arguments),
        inputs: Vec::new(),
    };
    folder.write(NAMES[0], measure_page(result, &request).html()?.as_bytes())?;
    folder.write(
        NAMES[1],
        &serde_json::to_vec_pretty(&measure_document(result))?,
    )?;
    folder.write(NAMES[2], &measured_spectrum_figure(result).figure.png()?)?;
    Ok(())
}

/// The command with what changes its numbers.
fn command_line(arguments: &Arguments) -> String {
    let mut words = vec![
        "quietedge measure".to_owned(),
        arguments.file.display().to_string(),
    ];
    let mut add = |option: &str, value: Option<String>| {
        if let Some(value) = value {
            words.push(format!("--{option} \"{value}\""));
        }
    };
    let number = |value: Option<f64>, unit: &str| value.map(|value| format!("{value} {unit}"));
    add(
        "reference",
        arguments
            .reference
            .as_ref()
            .map(|path| path.display().to_string()),
    );
    add(
        "study",
        arguments
            .study
            .as_ref()
            .map(|path| path.display().to_string()),
    );
    add("rate", number(arguments.rate, "Hz"));
    add("reference-rate", number(arguments.reference_rate, "Hz"));
    for set in &arguments.limits {
        add("limits", Some(set.clone()));
    }
    add("channel", number(arguments.channel, "Hz"));
    add(
        "authorized-bandwidth",
        number(arguments.authorized_bandwidth, "Hz"),
    );
    add("band", number(arguments.band, "Hz"));
    add("resolution", number(arguments.resolution, "Hz"));
    add("full-scale", number(arguments.full_scale, "dBm"));
    add("load-resistance", number(arguments.load_resistance, "ohm"));
    words.join(" ")
}
