//! Maps as the document of `quietedge map --json`.

use num_complex::Complex64;

use super::read::{Contents, MapFacts, Row};
use super::{Control, Failure};
use crate::input::{Problem, parse_json};

/// Facts and rows of the document in `text`, which came from `file`.
pub(super) fn from_json(file: &str, text: &str) -> Result<Contents, Problem> {
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
    let document: Document = parse_json(file, text, "the document of `quietedge map --json`")?;
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
        ("supply_v", facts.supply_v),
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
