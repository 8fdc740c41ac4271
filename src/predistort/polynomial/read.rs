//! Reads a polynomial that was written as JSON.

use std::io::Read;

use num_complex::Complex64;

use crate::drive::{MAX_TABLE_RATE, Polynomial, Term};
use crate::input::{Complaint, MAX_TEXT_BYTES, Place, Problem};
use crate::predistort::PolynomialSize;

#[derive(serde::Deserialize)]
struct Document {
    kind: String,
    version: u32,
    rate: usize,
    lead: usize,
    terms: Vec<Row>,
}

#[derive(serde::Deserialize)]
struct Row {
    signal_lag: usize,
    envelope_lag: usize,
    power: u32,
    re: f64,
    im: f64,
}

/// Reads the polynomial in `reader`, which came from `file`.
///
/// # Errors
/// The first thing wrong, with its line where the text is no such document.
pub fn read_polynomial(file: &str, reader: impl Read) -> Result<Polynomial, Problem> {
    let about = |given: String, allowed: &str| Problem::about_file(file, given, allowed);
    let mut text = String::new();
    match reader.take(MAX_TEXT_BYTES + 1).read_to_string(&mut text) {
        Err(error) => {
            return Err(about(
                format!("a file that cannot be read ({error})"),
                "text",
            ));
        }
        Ok(size) if size as u64 > MAX_TEXT_BYTES => {
            return Err(about(
                format!("more than {MAX_TEXT_BYTES} bytes"),
                "the terms of one polynomial",
            ));
        }
        Ok(_) => {}
    }
    let document: Document = serde_json::from_str(&text).map_err(|error| {
        let line = text
            .lines()
            .nth(error.line().saturating_sub(1))
            .unwrap_or_default();
        Problem::from(Complaint {
            file: file.to_owned(),
            place: Some(Place {
                line: error.line(),
                column: error.column().max(1),
                text: line.chars().take(200).collect(),
                width: 1,
            }),
            key: String::new(),
            given: error.to_string(),
            allowed:
                "a polynomial as `quietedge predistort --polynomial` writes it into polynomial.json"
                    .to_owned(),
            hint: None,
        })
    })?;
    if document.kind != "memory polynomial" || document.version != 1 {
        return Err(about(
            format!("kind \"{}\", version {}", document.kind, document.version),
            "kind \"memory polynomial\", version 1",
        ));
    }
    if !document.rate.is_power_of_two() || document.rate > MAX_TABLE_RATE {
        return Err(about(
            format!("rate = {}", document.rate),
            "1, 2, 4, ... 64",
        ));
    }
    let (power, memory, cross) = PolynomialSize::HIGHEST;
    let longest = memory + 2 * cross;
    if document.terms.is_empty() {
        return Err(about("no terms".to_owned(), "at least one term"));
    }
    if document.lead > cross {
        return Err(about(format!("lead = {}", document.lead), "0 to 8 samples"));
    }
    for (index, row) in document.terms.iter().enumerate() {
        let fits = row.signal_lag <= longest && row.envelope_lag <= longest && row.power <= power;
        if !fits || !row.re.is_finite() || !row.im.is_finite() {
            return Err(about(
                format!(
                    "term {}: lags {} and {}, power {}, coefficient {} + {}j",
                    index + 1,
                    row.signal_lag,
                    row.envelope_lag,
                    row.power,
                    row.re,
                    row.im
                ),
                "lags to 32 samples, powers to 12, finite coefficients",
            ));
        }
    }
    Ok(Polynomial {
        terms: document
            .terms
            .iter()
            .map(|row| Term {
                signal_lag: row.signal_lag,
                envelope_lag: row.envelope_lag,
                power: row.power,
            })
            .collect(),
        coefficients: document
            .terms
            .iter()
            .map(|row| Complex64::new(row.re, row.im))
            .collect(),
        lead: document.lead,
        rate: document.rate,
    })
}
