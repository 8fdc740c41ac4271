//! The result of a check as a page and as text for the terminal.

mod facts;
mod figures;
mod left_out;
mod numbers;
mod replay;
mod spectrum;

use super::page::{Conditions, Headline, Outcome, Page};
use super::table::{Align, Table};
use super::text::quantity;
use crate::study::{CheckResult, Hardware};
use crate::verdict::{self, Check};

pub use figures::{bend_figure, ccdf_figure, notch_figure};
pub use spectrum::spectrum_figure;

pub(super) use spectrum::spectrum_view;

/// How the run was asked for, to be repeated.
#[derive(Debug, Clone, Default)]
pub struct Request {
    /// The command line.
    pub command: String,
    /// Input files beside the study itself, as (name, text).
    pub inputs: Vec<(String, String)>,
}

pub(super) fn outcome(outcome: verdict::Outcome) -> Outcome {
    match outcome {
        verdict::Outcome::Within => Outcome::Within,
        verdict::Outcome::Outside => Outcome::Outside,
        verdict::Outcome::Undecided => Outcome::Undecided,
    }
}

/// The check that decided: the first of the verdict's own outcome with the smallest margin.
pub fn deciding(result: &CheckResult) -> Option<&Check> {
    let verdict = &result.judgement.verdict;
    verdict
        .checks
        .iter()
        .filter(|check| check.outcome == verdict.outcome)
        .min_by(|a, b| {
            let margin = |check: &Check| check.margin_db.unwrap_or(f64::NEG_INFINITY);
            margin(a).total_cmp(&margin(b))
        })
}

/// The report's page.
pub fn page(result: &CheckResult, request: &Request) -> Page {
    let study = &result.study;
    Page {
        title: study.title.clone(),
        subtitle: subtitle(result),
        headline: Some(headline(result)),
        checks: numbers::check_rows(result),
        warnings: result.warnings.iter().map(ToString::to_string).collect(),
        key_figures: numbers::key_figures(result),
        figures: figures::figures(result),
        tables: numbers::tables(result)
            .into_iter()
            .chain(replay::tables(result))
            .collect(),
        facts: facts::facts(result),
        model_limits: left_out::model_limits(result),
        conditions: Conditions {
            command: request.command.clone(),
            version: format!("quietedge {}", env!("CARGO_PKG_VERSION")),
            seed: result.scheme().seed(),
            inputs: std::iter::once(("study".to_owned(), study.text.clone()))
                .chain(request.inputs.iter().cloned())
                .collect(),
        },
    }
}

fn subtitle(result: &CheckResult) -> String {
    let hardware = match &result.study.hardware {
        Hardware::Stage(stage) => stage.title.clone(),
        Hardware::Map(_) => "a map from a file".to_owned(),
    };
    let note = result
        .study
        .note
        .as_deref()
        .map(|note| format!(" {note}"))
        .unwrap_or_default();
    format!(
        "{hardware}; {} at {}, scheme {}.{note}",
        result.signal.file,
        quantity(result.study.hardware.frequency_hz(), "Hz", 6),
        result.scheme().name()
    )
}

pub(super) fn headline(result: &CheckResult) -> Headline {
    let decided = deciding(result);
    Headline {
        outcome: outcome(result.judgement.verdict.outcome),
        reason: decided.map_or_else(String::new, |check| {
            format!("{}: {}", check.name, check.reason)
        }),
        margin_db: decided.and_then(|check| check.margin_db),
    }
}

/// The result for the terminal: verdict first.
pub fn text(result: &CheckResult) -> String {
    let verdict = &result.judgement.verdict;
    let mut checks = Table::new([
        ("", Align::Left),
        ("margin", Align::Right),
        ("found", Align::Right),
        ("allowed", Align::Right),
        ("check", Align::Left),
    ]);
    for row in numbers::check_rows(result) {
        let margin = row
            .margin_db
            .map_or("-".to_owned(), |margin| format!("{margin:+.2} dB"));
        let word = row.outcome.word().to_owned();
        checks.row([word, margin, row.found, row.allowed, row.name]);
    }
    let mut numbers = Table::new([("", Align::Left), ("", Align::Right), ("", Align::Left)]);
    for row in numbers::key_rows(result) {
        numbers.row(row);
    }
    let word = outcome(verdict.outcome).word().to_uppercase();
    let mut text = format!("{word}: {}\n", result.study.title);
    if let Some(check) = deciding(result) {
        text.push_str(&format!("{}: {}\n", check.name, check.reason));
    }
    for (title, table) in [("Checks", checks), ("Numbers", numbers)] {
        text.push_str(&format!("\n{title}\n{}\n", table.text()));
    }
    text.push_str(&replay::text(result));
    if !result.warnings.is_empty() {
        text.push_str("\nWarnings\n");
        for warning in &result.warnings {
            text.push_str(&format!("- {warning}\n"));
        }
    }
    text.push_str(
        "\nAn estimate from a model, no type approval. High voltages and RF burns: dummy load first; a licence is needed to transmit.",
    );
    text
}
