//! `quietedge predistort --from-capture`: the next table from a captured pair.

use std::path::{Path, PathBuf};

use super::{Arguments, NAMES, STEPS, inputs, write_table};
use crate::cli::arguments::quantity;
use crate::cli::{Console, Disk, Ending, Failure, OutputFolder};
use crate::drive::{Scheme, Shape, Shaping};
use crate::input::Files;
use crate::limits::Limits;
use crate::map::Control;
use crate::math::Window;
use crate::metrics::Repeat;
use crate::predistort::{NextRequest, Table, TableRequest, read_table};
use crate::report::check::Request;
use crate::report::predistort::{
    closed_document, closed_page, closed_spectra_figure, closed_text, lookup_figure,
};
use crate::signal::{self, FormatOptions, Source};
use crate::study::{
    ClosedRequest, ClosedResult, MeasureRequest, Predistortion, Scale, Study, next_from_capture,
};
use crate::units::{Dimension, watt_from_dbm};

/// How much of the way to the inverse is taken where a table is in force.
const DAMPING: f64 = 0.7;

#[derive(Debug, clap::Args)]
#[command(next_help_heading = "From captures")]
pub(super) struct CaptureOptions {
    /// The wanted signal, in front of the table, and what the transmitter made of it
    #[arg(long, num_args = 2, value_names = ["SENT", "RECEIVED"], conflicts_with_all = ["search", "polynomial", "full_output"])]
    from_capture: Option<Vec<PathBuf>>,

    /// The table that was in force (table.json); without it the magnitude itself was the control
    #[arg(long, value_name = "TABLE", requires = "from_capture")]
    previous: Option<PathBuf>,

    /// Part of the way to the inverse that is taken, above 0 to 1 [default: 1 for the first table, then 0.7]
    #[arg(long, value_name = "PART", requires = "from_capture", value_parser = quantity(Dimension::Ratio))]
    damping: Option<f64>,

    /// The wanted signal's full scale as a part of the control's range [default: the study's, or 1]
    #[arg(long, value_name = "PART", requires = "from_capture", value_parser = quantity(Dimension::Ratio))]
    level: Option<f64>,

    /// Full range of a supply that is the control [default: the previous table's or the study's, or parts of 1]
    #[arg(long, value_name = "VOLTS", requires = "from_capture", value_parser = quantity(Dimension::Voltage))]
    full_control: Option<f64>,

    /// Sample rate of the wanted signal, where its file does not hold it
    #[arg(long, value_name = "HZ", requires = "from_capture", value_parser = quantity(Dimension::Frequency))]
    sent_rate: Option<f64>,

    /// Sample rate of the capture, where its file does not hold it
    #[arg(long, value_name = "HZ", requires = "from_capture", value_parser = quantity(Dimension::Frequency))]
    received_rate: Option<f64>,

    /// Power of a constant magnitude of 1.0 in the capture: "37 dBm", "5 W"
    #[arg(long, value_name = "POWER", requires = "from_capture", value_parser = quantity(Dimension::Level))]
    full_scale: Option<f64>,
}

impl CaptureOptions {
    pub(super) fn is_given(&self) -> bool {
        self.from_capture.is_some()
    }
}

/// Runs the command on captures.
pub(super) fn run(
    arguments: &Arguments,
    folder: Option<&OutputFolder>,
    console: &Console,
) -> Result<Ending, Failure> {
    let options = &arguments.capture;
    let [sent, received] = options.from_capture.as_deref().unwrap_or_default() else {
        return Err(Failure::new("--from-capture: two files are needed"));
    };
    let study = match &arguments.study {
        None => None,
        Some(path) => Some((named(path)?, Disk::beside(path))),
    };
    let study = match study {
        None => None,
        Some((name, files)) => Some((Study::read(&name, &files)?, files)),
    };
    let previous = options.previous.as_deref().map(read_previous).transpose()?;
    let request = request(
        arguments,
        study.as_ref().map(|(study, _)| study),
        previous.as_ref(),
    )?;
    let mut reference = open(sent, options.sent_rate)?;
    let mut capture = open(received, options.received_rate)?;
    let bar = console.progress(STEPS, "predistorting");
    let result = next_from_capture(
        &request,
        previous.as_ref(),
        &mut *capture,
        &mut *reference,
        &mut |part| bar.set_position((part * STEPS as f64) as u64),
    );
    bar.finish_and_clear();
    let result = result?;
    console.print(&closed_text(&result))?;
    console.print_json(&closed_document(&result))?;
    if let Some(folder) = folder {
        let request = Request {
            command: command_line(arguments, sent, received),
            inputs: study.map_or(Vec::new(), |(study, files)| {
                let mut all = vec![("study".to_owned(), study.text.clone())];
                all.extend(inputs(&study, &files));
                all
            }),
        };
        write(folder, &result, &request)?;
        console.remark(&format!(
            "the report is in {}",
            folder.path(NAMES[0]).display()
        ));
    }
    Ok(if result.end.helps() {
        Ending::Within
    } else {
        Ending::Outside
    })
}

fn named(path: &Path) -> Result<String, Failure> {
    path.file_name()
        .and_then(|name| name.to_str())
        .map(str::to_owned)
        .ok_or_else(|| Failure::new(format!("{}: not the name of a file", path.display())))
}

fn open(path: &Path, rate_hz: Option<f64>) -> Result<Box<dyn Source>, Failure> {
    let options = FormatOptions {
        rate_hz,
        ..FormatOptions::default()
    };
    Ok(signal::open(&Disk::beside(path), &named(path)?, &options)?)
}

fn read_previous(path: &Path) -> Result<Table, Failure> {
    let reader = Disk::here()
        .open(&path.to_string_lossy())
        .map_err(|error| Failure::new(format!("cannot read {}: {error}", path.display())))?;
    Ok(read_table(&path.display().to_string(), reader)?)
}

fn request(
    arguments: &Arguments,
    study: Option<&Study>,
    previous: Option<&Table>,
) -> Result<ClosedRequest, Failure> {
    let options = &arguments.capture;
    for (option, value) in [("--damping", options.damping), ("--level", options.level)] {
        if let Some(value) = value
            && !(value > 0.0 && value <= 1.0)
        {
            return Err(Failure::new(format!(
                "{option}: given {value}; allowed: above 0, up to 1"
            )));
        }
    }
    if options.full_control.is_some_and(|full| full <= 0.0) {
        return Err(Failure::new("--full-control: more than 0 V is allowed"));
    }
    let base = match (previous, study.and_then(|study| study.predistort.as_ref())) {
        (Some(table), _) => same_sizes(table),
        (None, Some(Predistortion::Request(request))) => *request,
        (None, _) => TableRequest::default(),
    };
    let (control, full_control) = match (study, previous, options.full_control) {
        (Some(study), _, None) => study.table_range(),
        (Some(study), _, Some(full)) => (study.table_range().0, full),
        (None, _, Some(full)) => (Control::Supply, full),
        (None, Some(table), None) => (table.control, table.full_control),
        (None, None, None) => (Control::Drive, 1.0),
    };
    let plain = Shaping {
        shape: Shape::Corner,
        floor: 0.0,
    };
    let shaping = match study.map(|study| &study.scheme) {
        Some(Scheme::Supply(scheme)) => scheme.shaping,
        Some(Scheme::Width(_) | Scheme::Levels(_) | Scheme::Outphase(_)) => plain,
        Some(other) => {
            return Err(Failure::new(format!(
                "--from-capture: the study's scheme is {}, which takes no table",
                other.name()
            )));
        }
        None => plain,
    };
    let title = match (study, previous) {
        (Some(study), _) => study.title.clone(),
        (None, Some(table)) if !table.title.is_empty() => table.title.clone(),
        _ => "From captures".to_owned(),
    };
    let pair = options.from_capture.as_deref().unwrap_or_default();
    let shown = |index: usize| {
        pair.get(index)
            .map_or(String::new(), |path| path.display().to_string())
    };
    Ok(ClosedRequest {
        measure: MeasureRequest {
            file: shown(1),
            reference: Some(shown(0)),
            repeat: Repeat::Auto,
            limits: study.map_or_else(Limits::default, |study| study.limits.clone()),
            scale: options
                .full_scale
                .map_or(Scale::Unknown, |dbm| Scale::FullScale {
                    full_scale_w: watt_from_dbm(dbm),
                }),
            window: study.map_or(Window::BlackmanHarris, |study| study.window),
            resolution_hz: study.and_then(|study| study.resolution_hz),
            format: None,
            band_hz: None,
        },
        level: options
            .level
            .or(study.map(|study| study.signal.level))
            .unwrap_or(1.0),
        previous: options
            .previous
            .as_ref()
            .map(|path| path.display().to_string()),
        next: NextRequest {
            table: arguments.table.request(base)?,
            shaping,
            damping: options
                .damping
                .unwrap_or(if previous.is_some() { DAMPING } else { 1.0 }),
            full_control,
            control,
            title,
        },
    })
}

/// The sizes of a table that is there.
fn same_sizes(table: &Table) -> TableRequest {
    TableRequest {
        size: *table.lookup.size(),
        spacing: table.lookup.spacing(),
        between: table.lookup.between(),
        rate: table.lookup.rate(),
        ..TableRequest::default()
    }
}

fn write(folder: &OutputFolder, result: &ClosedResult, request: &Request) -> Result<(), Failure> {
    folder.write(NAMES[0], closed_page(result, request).html()?.as_bytes())?;
    folder.write(
        NAMES[1],
        &serde_json::to_vec_pretty(&closed_document(result))?,
    )?;
    folder.write(NAMES[2], &closed_spectra_figure(result).figure.png()?)?;
    write_table(folder, &result.next.table)?;
    folder.write(NAMES[10], &lookup_figure(&result.next.table).figure.png()?)?;
    Ok(())
}

/// The command with what changes its numbers.
fn command_line(arguments: &Arguments, sent: &Path, received: &Path) -> String {
    let options = &arguments.capture;
    let mut words = vec!["quietedge predistort".to_owned()];
    words.extend(
        arguments
            .study
            .as_ref()
            .map(|path| path.display().to_string()),
    );
    words.push(format!(
        "--from-capture {} {}",
        sent.display(),
        received.display()
    ));
    words.extend(
        options
            .previous
            .as_ref()
            .map(|path| format!("--previous {}", path.display())),
    );
    for (option, value, unit) in [
        ("damping", options.damping, ""),
        ("level", options.level, ""),
        ("full-control", options.full_control, " V"),
        ("sent-rate", options.sent_rate, " Hz"),
        ("received-rate", options.received_rate, " Hz"),
        ("full-scale", options.full_scale, " dBm"),
    ] {
        words.extend(value.map(|value| format!("--{option} \"{value}{unit}\"")));
    }
    words.join(" ")
}
