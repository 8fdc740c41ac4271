//! Maps as text: facts in comments, a header that names the columns, a row a point.

use num_complex::Complex64;

use super::read::{Contents, MOST, MapFacts, Row};
use super::{Control, Failure};
use crate::input::{Complaint, Place, Problem, nearest};
use crate::units::{self, Dimension};

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

/// Facts and rows of the map in `text`, which came from `file`.
pub(super) fn from_csv(file: &str, text: &str) -> Result<Contents, Problem> {
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
