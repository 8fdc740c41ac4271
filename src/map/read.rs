//! Maps from files: measured, simulated elsewhere, or written by `quietedge map`.
//!
//! CSV: lines `# key = value` with facts, then a header naming the columns, then numbers. JSON: the
//! document of `quietedge map --json`. Both are described in `docs/formats.md`.

use std::io::Read;

use num_complex::Complex64;

use super::read_csv::from_csv;
use super::read_json::from_json;
use super::{Control, Failure, Map, MapPoint, Origin};
use crate::input::{Problem, read_text};

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

/// No volt, ampere or degree of a transmitter is larger than this.
pub(super) const MOST: f64 = 1e9;

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
        Control::Width | Control::Drive => 0.0..=1.0,
        Control::Angle => -std::f64::consts::PI..=std::f64::consts::PI,
    };
    let mut map_points = Vec::with_capacity(points.len());
    for (index, point) in points.into_iter().enumerate() {
        if !allowed_controls.contains(&point.control) {
            return Err(about(
                format!("control {} in point {}", point.control, index + 1),
                match control {
                    Control::Supply => "a supply of 0 V or more",
                    Control::Drive => "a fraction of full drive from 0 to 1",
                    Control::Angle => "an angle of at most half a turn, in radians",
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
            Control::Width | Control::Drive | Control::Angle => {
                needed("supply", point.supply_v.or(supply_v))?
            }
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
pub(super) struct Row {
    pub(super) control: f64,
    pub(super) output_v: Complex64,
    pub(super) supply_v: Option<f64>,
    pub(super) supply_a: Option<f64>,
    pub(super) efficiency: Option<f64>,
    pub(super) switch_peak_v: Option<f64>,
    pub(super) switch_peak_a: Option<f64>,
    pub(super) closing_v: Option<f64>,
    pub(super) driver_w: Option<f64>,
}

/// What a file holds: facts, rows, and the points that failed when the map was made.
pub(super) type Contents = (MapFacts, Vec<Row>, Vec<Failure>);

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
