//! The result of a measurement as a page, as text for the terminal and as a document.

mod facts;
mod figures;
mod numbers;

use serde_json::{Value, json};

use super::check::{Request, outcome};
use super::page::{Conditions, Headline, KeyFigure, Page};
use super::table::{Align, Table};
use crate::study::MeasureResult;

pub use figures::measured_spectrum_figure;

use facts::facts;
use numbers::{check_rows, judged, key_rows, margin, memory_rows, reason, tables};

/// What a measurement leaves out.
const MODEL_LIMITS: [&str; 4] = [
    "What the receiver adds (its noise, spurs, response and clock) is part of every number.",
    "Where a reference is given, its rate, frequency offset, drift, delay and one complex gain are taken off \
     before anything is read, the spectrum included.",
    "The error vector is that of the waveform in the stated band, not that of equalized symbols, unless it says so.",
    "Peaks between samples are not counted; harmonics of the carrier are not in the capture.",
];

/// The report's page.
pub fn measure_page(result: &MeasureResult, request: &Request) -> Page {
    let headline = judged(result).then(|| {
        let verdict = &result.judgement.verdict;
        let decided = verdict
            .checks
            .iter()
            .filter(|check| check.outcome == verdict.outcome)
            .min_by(|a, b| margin(a).total_cmp(&margin(b)));
        Headline {
            outcome: outcome(verdict.outcome),
            reason: decided.map_or_else(String::new, reason),
            margin_db: decided.and_then(|check| check.margin_db),
        }
    });
    Page {
        title: format!("Measured: {}", result.signal.file),
        subtitle: match &result.reference {
            Some(sent) => format!("Held against {}.", sent.file),
            None => "Without a reference.".to_owned(),
        },
        headline,
        checks: check_rows(result),
        warnings: result.warnings.clone(),
        key_figures: key_rows(result)
            .into_iter()
            .map(|[name, value, note]| KeyFigure { name, value, note })
            .collect(),
        figures: figures::figures(result),
        tables: tables(result),
        facts: facts(result),
        model_limits: MODEL_LIMITS.iter().map(|text| (*text).to_owned()).collect(),
        conditions: Conditions {
            command: request.command.clone(),
            version: format!("quietedge {}", env!("CARGO_PKG_VERSION")),
            seed: None,
            inputs: request.inputs.clone(),
        },
    }
}

/// The result for the terminal.
pub fn measure_text(result: &MeasureResult) -> String {
    let mut text = if judged(result) {
        let word = outcome(result.judgement.verdict.outcome).word();
        let mut checks = Table::new([
            ("", Align::Left),
            ("margin", Align::Right),
            ("check", Align::Left),
            ("reason", Align::Left),
        ]);
        for row in check_rows(result) {
            checks.row([
                row.outcome.word().to_owned(),
                row.margin_db
                    .map_or("-".to_owned(), |margin| format!("{margin:+.2} dB")),
                row.name,
                row.reason,
            ]);
        }
        format!(
            "{}: {}\n\nChecks\n{}\n",
            word.to_uppercase(),
            result.signal.file,
            checks.text()
        )
    } else {
        format!("{}\n", result.signal.file)
    };
    let mut numbers = Table::new([("", Align::Left), ("", Align::Right), ("", Align::Left)]);
    for row in key_rows(result) {
        numbers.row(row);
    }
    text.push_str(&format!("\nNumbers\n{}\n", numbers.text()));
    let memory = memory_rows(result);
    if !memory.is_empty() {
        let mut table = Table::new([
            ("model", Align::Left),
            ("leaves", Align::Right),
            ("terms", Align::Right),
            ("condition", Align::Right),
            ("largest", Align::Right),
        ]);
        for row in memory {
            table.row(row);
        }
        text.push_str(&format!("\nModels of the pair\n{}\n", table.text()));
    }
    for group in facts(result)
        .iter()
        .filter(|group| group.title.starts_with("Taken"))
    {
        let mut table = Table::new([("", Align::Left), ("", Align::Left)]);
        for (name, value) in &group.rows {
            table.row([name.clone(), value.clone()]);
        }
        text.push_str(&format!("\n{}\n{}\n", group.title, table.text()));
    }
    if !result.warnings.is_empty() {
        text.push_str("\nWarnings\n");
        for warning in &result.warnings {
            text.push_str(&format!("- {warning}\n"));
        }
    }
    text.trim_end().to_owned()
}

/// The document of `quietedge measure`.
pub fn measure_document(result: &MeasureResult) -> Value {
    json!({
        "signal": result.signal,
        "reference": result.reference,
        "scale": result.request.scale,
        "alignment": result.sync,
        "metrics": result.metrics,
        "bend": result.bend,
        "memory": result.memory,
        "averaged": result.averaged,
        "format": result.request.format,
        "symbols": result.symbols,
        "verdict": judged(result).then_some(&result.judgement.verdict),
        "warnings": result.warnings,
    })
}
