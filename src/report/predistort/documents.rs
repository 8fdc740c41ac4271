//! The machine-readable results.

use std::fmt::Write;

use serde_json::{Value, json};

use crate::map::Control;
use crate::predistort::{Fit, Learned};
use crate::study::{CheckResult, PolynomialResult, PredistortResult};

/// The document of `quietedge predistort`: `metrics` and `verdict` are those behind the table.
pub fn predistort_document(result: &PredistortResult) -> Value {
    let after = &result.after;
    let side = |check: &CheckResult| {
        json!({
            "metrics": check.metrics,
            "verdict": check.judgement.verdict,
            "sampling": check.rate,
            "warnings": check.warnings,
        })
    };
    let (lookup, size) = (&result.table.lookup, result.table.lookup.size());
    json!({
        "study": after.study.title,
        "scheme": after.scheme().name(),
        "signal": after.signal,
        "level": after.study.signal.level,
        "sampling": after.rate,
        "metrics": after.metrics,
        "verdict": after.judgement.verdict,
        "warnings": after.warnings,
        "before": side(&result.before),
        "table": {
            "size": size,
            "spacing": lookup.spacing(),
            "between": lookup.between(),
            "rate": lookup.rate(),
            "below_floor": result.request.table.below_floor,
            "stored_bits": size.stored_bits(),
            "control": result.table.control.name(),
            "full_control": result.table.full_control,
            "full_control_v": (result.table.control == Control::Supply)
                .then_some(result.table.full_control),
            "full_output_v": result.table.full_output_v,
            "entries": result.table.counts(),
        },
        "search": result.search,
        "polynomial": result.polynomial.as_ref().map(|polynomial| json!({
            "learned": learned_document(&polynomial.learned),
            "instants": polynomial.instants,
            "words": polynomial.words,
            "after": polynomial.after.as_ref().map(side),
        })),
    })
}

fn learned_document(learned: &Learned) -> Value {
    json!({
        "size": learned.size,
        "passes": learned.passes,
        "end": learned.end,
        "choice": learned.choice,
        "fit": learned.fit.as_ref().map(fit_document),
    })
}

fn fit_document(fit: &Fit) -> Value {
    let polynomial = &fit.polynomial;
    json!({
        "terms": polynomial.terms.len(),
        "multiplications": polynomial.multiplications(),
        "condition": fit.condition,
        "largest_coefficient": fit.largest_coefficient,
        "nmse_db": fit.nmse_db,
    })
}

/// The coefficients as a document, where a polynomial was learned.
pub fn polynomial_document(result: &PolynomialResult) -> Option<Value> {
    let fit = result.learned.fit.as_ref()?;
    let polynomial = &fit.polynomial;
    let terms: Vec<Value> = polynomial
        .terms
        .iter()
        .zip(&polynomial.coefficients)
        .map(|(term, c)| {
            let words = result.words.map(|words| words.words(*c));
            json!({
                "re_word": words.map(|words| words.0),
                "im_word": words.map(|words| words.1),
                "signal_lag": term.signal_lag,
                "envelope_lag": term.envelope_lag,
                "power": term.power,
                "re": c.re,
                "im": c.im,
            })
        })
        .collect();
    Some(json!({
        "kind": "memory polynomial",
        "version": 1,
        "form": result.learned.size.form,
        "size": result.learned.size,
        "rate": polynomial.rate,
        "lead": polynomial.lead,
        "condition": fit.condition,
        "largest_coefficient": fit.largest_coefficient,
        "words": result.words,
        "terms": terms,
    }))
}

/// The coefficients as text: `u(n) = sum c x(n - signal_lag) |x(n - envelope_lag)|^power`.
pub fn polynomial_csv(result: &PolynomialResult) -> Option<String> {
    let polynomial = &result.learned.fit.as_ref()?.polynomial;
    let mut text = format!(
        "# u(n) = sum c x(n - signal_lag) |x(n - envelope_lag)|^power\n# rate = {} times the signal's\n# lead = {} samples\nsignal_lag,envelope_lag,power,re,im\n",
        polynomial.rate, polynomial.lead
    );
    for (term, c) in polynomial.terms.iter().zip(&polynomial.coefficients) {
        let _ = writeln!(
            text,
            "{},{},{},{},{}",
            term.signal_lag, term.envelope_lag, term.power, c.re, c.im
        );
    }
    Some(text)
}
