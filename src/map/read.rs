//! Maps from files: measured, simulated elsewhere, or written by `quietedge map`.
//!
//! CSV: lines `# key = value` with facts, then a header naming the columns, then numbers. JSON: the
//! document of `quietedge map --json`. Both are described in `docs/formats.md`.

use std::io::Read;

use num_complex::Complex64;

use super::{Control, Failure, Map, MapPoint, Origin};
use crate::input::{Complaint, Place, Problem, nearest, read_text};
use crate::units::{self, Dimension};

/// How the file is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum MapFormat {
    /// Columns of text.
    Csv,
    /// One document.
    Json,
}

/// What must be known beside the points; given by the study, or standing in the file.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct MapFacts {
    /// What is moved.
    pub control: Option<Control>,
    /// Load resistance, ohm.
    pub load_ohm: Option<f64>,
    /// Carrier, Hz.
    pub frequency_hz: Option<f64>,
    /// Supply of a width map, V.
    pub supply_v: Option<f64>,
}

const COLUMNS: [&str; 12] = [
    "control",
    "output_re_v",
    "output_im_v",
    "amplitude_v",
    "phase_deg",
    "supply_v",
    "supply_a",
    "efficiency",
    "switch_peak_v",
    "switch_peak_a",
    "closing_v",
    "driver_w",
];

/// No volt, ampere or degree of a transmitter is larger than this.
const MOST: f64 = 1e9;

/// Reads the map in `reader`, which came from `file`; `facts` stated in the study win over the file's own
/// where the file is silent, and must agree where it speaks.
///
/// # Errors
/// The first thing wrong, with its line.
pub fn read_map(
    file: &str,
    format: MapFormat,
    reader: impl Read,
    facts: &MapFacts,
) -> Result<Map, Problem> {
    let about = |given: String, allowed: &str| Problem::about_file(file, given, allowed);
    let text = read_text(reader)
        .map_err(|error| Problem::unreadable(file, &error, "a map, text in UTF-8"))?;
    let (own, points, failures) = match format {
        MapFormat::Csv => from_csv(file, &text)?,
        MapFormat::Json => from_json(file, &text)?,
    };
    let agree = |name: &str, own: Option<f64>, stated: Option<f64>| match (own, stated) {
        (Some(a), Some(b)) if (a - b).abs() > 1e-9 * a.abs().max(b.abs()) => Err(about(
            format!("{name} {a} in the file and {b} in the study"),
            "the same number, or only one of them",
        )),
        (a, b) => Ok(a.or(b)),
    };
    let needed = |name: &str, value: Option<f64>| {
        value.ok_or_else(|| {
            about(
                format!("no {name}"),
                "`# key = value` in the file, or the key in the study's map table",
            )
        })
    };
    let control = own.control.or(facts.control).unwrap_or(Control::Supply);
    let load_ohm = needed(
        "load_resistance",
        agree("load_resistance", own.load_ohm, facts.load_ohm)?,
    )?;
    let frequency_hz = needed(
        "frequency",
        agree("frequency", own.frequency_hz, facts.frequency_hz)?,
    )?;
    let supply_v = agree("supply", own.supply_v, facts.supply_v)?;
    if points.len() < 2 {
        return Err(about(
            format!("{} of the points that make a map", points.len()),
            "at least two, sorted by control",
        ));
    }
    let allowed_controls = match control {
        Control::Supply => 0.0..=MOST,
        Control::Width => 0.0..=1.0,
    };
    let mut map_points = Vec::with_capacity(points.len());
    for (index, point) in points.into_iter().enumerate() {
        if !allowed_controls.contains(&point.control) {
            return Err(about(
                format!("control {} in point {}", point.control, index + 1),
                match control {
                    Control::Supply => "a supply of 0 V or more",
                    Control::Width => "a width from 0 to 1, a fraction of the period",
                },
            ));
        }
        if point.output_v.norm().is_nan() || point.output_v.norm() > MOST {
            let given = format!("an output of {} V in point {}", point.output_v, index + 1);
            return Err(about(given, "at most 1e9 V"));
        }
        let supply_v = match control {
            Control::Supply => point.control,
            Control::Width => needed("supply", point.supply_v.or(supply_v))?,
        };
        map_points.push(point.finish(supply_v, load_ohm));
    }
    Map::new(control, Origin::File, frequency_hz, load_ohm, map_points)
        .map(|map| map.with_failures(failures))
        .map_err(|error| {
            about(
                error.to_string(),
                "at least two points, sorted by control, with output",
            )
        })
}

/// One row as far as the file says.
#[derive(Debug, Clone, Copy, Default)]
struct Row {
    control: f64,
    output_v: Complex64,
    supply_v: Option<f64>,
    supply_a: Option<f64>,
    efficiency: Option<f64>,
    switch_peak_v: Option<f64>,
    switch_peak_a: Option<f64>,
    closing_v: Option<f64>,
    driver_w: Option<f64>,
}

impl Row {
    fn finish(self, supply_v: f64, load_ohm: f64) -> MapPoint {
        let output_w = self.output_v.norm_sqr() / (2.0 * load_ohm);
        let from_current = self
            .supply_a
            .map(|amp| amp * supply_v)
            .filter(|watt| *watt > 0.0);
        MapPoint {
            control: self.control,
            output_v: self.output_v,
            supply_v,
            supply_a: self.supply_a,
            efficiency: self.efficiency.or(from_current.map(|watt| output_w / watt)),
            switch_peak_v: self.switch_peak_v,
            switch_peak_a: self.switch_peak_a,
            switch_min_v: None,
            closing_v: self.closing_v,
            driver_w: self.driver_w,
        }
    }
}

type Contents = (MapFacts, Vec<Row>, Vec<Failure>);

fn from_csv(file: &str, text: &str) -> Result<Contents, Problem> {
    let complain = |line: usize, key: &str, given: String, allowed: String| {
        let content = text
            .lines()
            .nth(line.saturating_sub(1))
            .unwrap_or_default()
            .to_owned();
        let width = content.chars().count().max(1);
        Problem::from(Complaint {
            file: file.to_owned(),
            place: Some(Place {
                line,
                column: 1,
                text: content,
                width,
            }),
            key: key.to_owned(),
            given,
            allowed,
            hint: None,
        })
    };
    let (facts, failures) = facts_of_comments(text, &complain)?;
    let header_line = text
        .lines()
        .position(|line| !line.starts_with('#') && !line.trim().is_empty())
        .map_or(1, |index| index + 1);
    let mut reader = csv::ReaderBuilder::new()
        .comment(Some(b'#'))
        .trim(csv::Trim::All)
        .from_reader(text.as_bytes());
    let header = reader
        .headers()
        .map_err(|error| {
            complain(
                header_line,
                "",
                error.to_string(),
                "a header of column names".to_owned(),
            )
        })?
        .clone();
    let mut columns = Vec::new();
    for name in &header {
        let column = COLUMNS
            .iter()
            .position(|known| *known == name)
            .ok_or_else(|| {
                let problem = complain(
                    header_line,
                    name,
                    "an unknown column".to_owned(),
                    COLUMNS.join(", "),
                );
                match nearest(name, &COLUMNS) {
                    Some(known) => problem.with_hint(format!("did you mean \"{known}\"?")),
                    None => problem,
                }
            })?;
        if columns.contains(&COLUMNS[column]) {
            return Err(complain(
                header_line,
                name,
                "the column twice".to_owned(),
                "every column once".to_owned(),
            ));
        }
        columns.push(COLUMNS[column]);
    }
    let has = |name: &str| columns.contains(&name);
    let cartesian = has("output_re_v") && has("output_im_v");
    if !has("control") || (!cartesian && !has("amplitude_v")) {
        return Err(complain(
            header_line,
            "",
            match columns.len() {
                0 => "no columns".to_owned(),
                _ => format!("the columns {}", columns.join(", ")),
            },
            "control and either output_re_v, output_im_v or amplitude_v, phase_deg".to_owned(),
        ));
    }
    let mut rows: Vec<Row> = Vec::new();
    for record in reader.records() {
        let record = record.map_err(|error| {
            let line = error
                .position()
                .map_or(header_line, |position| position.line() as usize);
            let given = match error.kind() {
                csv::ErrorKind::UnequalLengths { len, .. } => format!("{len} values"),
                _ => format!("a row that cannot be read ({error})"),
            };
            let allowed = format!("{} values, one per column", columns.len());
            complain(line, "", given, allowed)
        })?;
        let line = record
            .position()
            .map_or(header_line, |position| position.line() as usize);
        let mut row = Row::default();
        let (mut amplitude, mut phase) = (0.0, 0.0);
        for (&name, field) in columns.iter().zip(&record) {
            let value: f64 = field
                .parse()
                .ok()
                .filter(|value: &f64| value.abs() <= MOST)
                .ok_or_else(|| {
                    complain(
                        line,
                        name,
                        format!("\"{field}\""),
                        format!("a number of at most {MOST:e}"),
                    )
                })?;
            match name {
                "control" => row.control = value,
                "output_re_v" => row.output_v.re = value,
                "output_im_v" => row.output_v.im = value,
                "amplitude_v" => amplitude = value,
                "phase_deg" => phase = value,
                "supply_v" => row.supply_v = Some(value),
                "supply_a" => row.supply_a = Some(value),
                "efficiency" => row.efficiency = Some(value),
                "switch_peak_v" => row.switch_peak_v = Some(value),
                "switch_peak_a" => row.switch_peak_a = Some(value),
                "closing_v" => row.closing_v = Some(value),
                _ => row.driver_w = Some(value),
            }
        }
        if !cartesian {
            if amplitude < 0.0 {
                let given = amplitude.to_string();
                return Err(complain(line, "amplitude_v", given, "0 or more".to_owned()));
            }
            row.output_v = Complex64::from_polar(amplitude, f64::to_radians(phase));
        }
        if rows.last().is_some_and(|last| last.control >= row.control) {
            return Err(complain(
                line,
                "control",
                row.control.to_string(),
                "more than in the row before it".to_owned(),
            ));
        }
        rows.push(row);
    }
    Ok((facts, rows, failures))
}

fn facts_of_comments(
    text: &str,
    complain: &impl Fn(usize, &str, String, String) -> Problem,
) -> Result<(MapFacts, Vec<Failure>), Problem> {
    let mut facts = MapFacts::default();
    let mut failures = Vec::new();
    for (index, line) in text.lines().enumerate() {
        let Some((key, value)) = line.strip_prefix('#').and_then(|fact| fact.split_once('='))
        else {
            continue;
        };
        let (key, value) = (key.trim(), value.trim());
        let quantity = |dimension: Dimension| {
            units::parse(value, dimension)
                .ok()
                .filter(|value| *value > 0.0)
                .map(Some)
                .ok_or_else(|| {
                    complain(
                        index + 1,
                        key,
                        value.to_owned(),
                        format!("{dimension}, such as {}", dimension.example()),
                    )
                })
        };
        match key {
            "control" => {
                facts.control = Some(match value {
                    "supply" => Control::Supply,
                    "width" => Control::Width,
                    _ => {
                        let allowed = "supply, width".to_owned();
                        return Err(complain(index + 1, key, value.to_owned(), allowed));
                    }
                });
            }
            "load_resistance" => facts.load_ohm = quantity(Dimension::Resistance)?,
            "frequency" => facts.frequency_hz = quantity(Dimension::Frequency)?,
            "supply" => facts.supply_v = quantity(Dimension::Voltage)?,
            "failed" => {
                let (control, reason) = value.split_once(' ').unwrap_or((value, ""));
                let control = control
                    .parse()
                    .ok()
                    .filter(|control: &f64| control.is_finite())
                    .ok_or_else(|| {
                        let allowed = "a control and the reason".to_owned();
                        complain(index + 1, key, value.to_owned(), allowed)
                    })?;
                failures.push(Failure {
                    control,
                    reason: reason.to_owned(),
                });
            }
            _ => {}
        }
    }
    Ok((facts, failures))
}

/// The words of `error`; its line and column stand in the place already.
fn without_position(error: &serde_json::Error) -> String {
    let text = error.to_string();
    match text.rfind(" at line ") {
        Some(at) => text[..at].to_owned(),
        None => text,
    }
}

fn from_json(file: &str, text: &str) -> Result<Contents, Problem> {
    #[derive(serde::Deserialize)]
    struct Document {
        control: Option<String>,
        load_ohm: Option<f64>,
        frequency_hz: Option<f64>,
        supply_v: Option<f64>,
        points: Vec<Point>,
        #[serde(default)]
        failures: Vec<Failure>,
    }
    #[derive(serde::Deserialize)]
    struct Point {
        control: f64,
        output_v: Output,
        supply_v: Option<f64>,
        supply_a: Option<f64>,
        efficiency: Option<f64>,
        switch_peak_v: Option<f64>,
        switch_peak_a: Option<f64>,
        closing_v: Option<f64>,
        driver_w: Option<f64>,
    }
    #[derive(serde::Deserialize)]
    struct Output {
        re: f64,
        im: f64,
    }
    let document: Document = serde_json::from_str(text).map_err(|error| {
        let content = text
            .lines()
            .nth(error.line().saturating_sub(1))
            .unwrap_or_default();
        Problem::from(Complaint {
            file: file.to_owned(),
            place: Some(Place {
                line: error.line(),
                column: error.column().max(1),
                text: content.chars().take(200).collect(),
                width: 1,
            }),
            key: String::new(),
            given: without_position(&error),
            allowed: "the document of `quietedge map --json`".to_owned(),
            hint: None,
        })
    })?;
    let control = match document.control.as_deref() {
        None => None,
        Some("supply") => Some(Control::Supply),
        Some("width") => Some(Control::Width),
        Some(other) => {
            return Err(Problem::about_file(
                file,
                format!("control \"{other}\""),
                "supply, width",
            ));
        }
    };
    let facts = MapFacts {
        control,
        load_ohm: document.load_ohm,
        frequency_hz: document.frequency_hz,
        supply_v: document.supply_v,
    };
    for (name, value) in [
        ("load_ohm", facts.load_ohm),
        ("frequency_hz", facts.frequency_hz),
    ] {
        if let Some(value) = value
            && !(value > 0.0 && value.is_finite())
        {
            let given = format!("{name} {value}");
            return Err(Problem::about_file(file, given, "more than 0"));
        }
    }
    let rows = document
        .points
        .into_iter()
        .map(|point| Row {
            control: point.control,
            output_v: Complex64::new(point.output_v.re, point.output_v.im),
            supply_v: point.supply_v,
            supply_a: point.supply_a,
            efficiency: point.efficiency,
            switch_peak_v: point.switch_peak_v,
            switch_peak_a: point.switch_peak_a,
            closing_v: point.closing_v,
            driver_w: point.driver_w,
        })
        .collect();
    Ok((facts, rows, document.failures))
}
