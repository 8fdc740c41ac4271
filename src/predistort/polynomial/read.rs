//! Reads a polynomial that was written as JSON.

use std::io::Read;

use num_complex::Complex64;

use crate::drive::{MAX_TABLE_RATE, Polynomial, Term};
use crate::input::{Problem, parse_json, read_text};
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
    let text = read_text(reader)
        .map_err(|error| Problem::unreadable(file, &error, "a polynomial, text in UTF-8"))?;
    let document: Document = parse_json(
        file,
        &text,
        "a polynomial as `quietedge predistort --polynomial` writes it into polynomial.json",
    )?;
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
