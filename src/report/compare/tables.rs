//! What schemes come to, and where their energy goes, a row each.

use super::{full_name, scheme_name, tightest, worst_acpr_db};
use crate::report::page::{DataTable, Outcome};
use crate::report::table::{Align, Table};
use crate::report::text::quantity;
use crate::study::{CheckResult, Compared, Rank, follows};
use crate::verdict;

const RESULTS: [(&str, Align); 9] = [
    ("", Align::Right),
    ("scheme", Align::Left),
    ("predistorted", Align::Left),
    ("power", Align::Right),
    ("efficiency", Align::Right),
    ("EVM", Align::Right),
    ("worst ACPR", Align::Right),
    ("mask margin", Align::Right),
    ("verdict", Align::Left),
];

const PARTS: [(&str, Align); 10] = [
    ("", Align::Right),
    ("scheme", Align::Left),
    ("efficiency", Align::Right),
    ("modulator", Align::Right),
    ("stage", Align::Right),
    ("driver", Align::Right),
    ("combiner", Align::Right),
    ("filter", Align::Right),
    ("drain peak", Align::Right),
    ("switch peak", Align::Right),
];

fn percent(part: Option<f64>) -> String {
    part.map_or("not known".to_owned(), |part| {
        format!("{:.1} %", 100.0 * part)
    })
}

fn verdict_word(result: &CheckResult) -> String {
    let word = match result.judgement.verdict.outcome {
        verdict::Outcome::Within => Outcome::Within,
        verdict::Outcome::Outside => Outcome::Outside,
        verdict::Outcome::Undecided => Outcome::Undecided,
    };
    let cannot = if follows(result) {
        ""
    } else {
        ", cannot follow"
    };
    format!("{}{cannot}", word.word())
}

fn result_row(place: usize, one: &Compared) -> Vec<String> {
    let result = &one.result;
    let metrics = &result.metrics;
    vec![
        (place + 1).to_string(),
        scheme_name(one),
        one.inverted.word().to_owned(),
        format!("{:.2} dBm", metrics.power_dbm),
        percent(metrics.efficiency),
        format!("{:.2} %", metrics.evm_percent),
        worst_acpr_db(result).map_or("-".to_owned(), |db| format!("{db:.1} dB")),
        tightest(result).map_or("-".to_owned(), |worst| {
            format!(
                "{:+.2} dB at {}",
                worst.margin_db,
                quantity(worst.worst_hz * worst.side.sign(), "Hz", 4)
            )
        }),
        verdict_word(result),
    ]
}

fn parts_row(place: usize, one: &Compared) -> Vec<String> {
    let result = &one.result;
    let parts = &result.metrics.efficiency_parts;
    let stress = |value: Option<f64>, unit: &str| {
        value.map_or("-".to_owned(), |value| quantity(value, unit, 3))
    };
    vec![
        (place + 1).to_string(),
        full_name(one),
        percent(result.metrics.efficiency),
        percent(parts.modulator),
        percent(parts.stage),
        percent(parts.driver),
        percent(Some(parts.combiner)),
        percent(Some(parts.filter)),
        stress(result.stress.map(|stress| stress.peak_v), "V"),
        stress(result.stress.map(|stress| stress.peak_a), "A"),
    ]
}

type Row = fn(usize, &Compared) -> Vec<String>;

fn rows(row: Row, compared: &[Compared], ranks: &[Rank]) -> Vec<Vec<String>> {
    let places = ranks.iter().enumerate();
    places
        .map(|(place, rank)| row(place, &compared[rank.index]))
        .collect()
}

/// Both tables, best first.
pub(super) fn tables(compared: &[Compared], ranks: &[Rank]) -> Vec<DataTable> {
    let table = |title: &str, columns: &[(&str, Align)], row: Row| DataTable {
        title: title.to_owned(),
        columns: columns
            .iter()
            .map(|(name, align)| ((*name).to_owned(), *align))
            .collect(),
        rows: rows(row, compared, ranks),
    };
    vec![
        table("Schemes", &RESULTS, result_row),
        table("Efficiency by its factors, and stress", &PARTS, parts_row),
    ]
}

/// Place and name of each scheme, and why it stands there.
pub(super) fn reasons(compared: &[Compared], ranks: &[Rank]) -> Vec<(String, String)> {
    ranks
        .iter()
        .enumerate()
        .map(|(place, rank)| {
            let name = full_name(&compared[rank.index]);
            (format!("{}. {name}", place + 1), rank.reason.clone())
        })
        .collect()
}

/// Every caution once, with the schemes that it is for; those that are for all of them last.
pub(super) fn warnings(compared: &[Compared]) -> Vec<String> {
    let mut gathered: Vec<(String, Vec<String>)> = Vec::new();
    for one in compared {
        for warning in &one.result.warnings {
            let (text, name) = (warning.to_string(), full_name(one));
            match gathered.iter_mut().find(|(other, _)| *other == text) {
                Some((_, names)) => names.push(name),
                None => gathered.push((text, vec![name])),
            }
        }
    }
    let all = |names: &Vec<String>| names.len() == compared.len();
    gathered.sort_by_key(|(_, names)| all(names));
    gathered
        .into_iter()
        .map(|(text, names)| {
            if all(&names) {
                text
            } else {
                format!("{}: {text}", names.join(", "))
            }
        })
        .collect()
}

/// The comparison for the terminal.
pub fn text(compared: &[Compared], ranks: &[Rank]) -> String {
    let mut text = String::new();
    for table in tables(compared, ranks) {
        if !text.is_empty() {
            text.push_str(&format!("\n{}\n", table.title));
        }
        let columns = table.columns.iter();
        let mut lines = Table::new(columns.map(|(name, align)| (name.as_str(), *align)));
        for cells in table.rows {
            lines.row(cells);
        }
        text.push_str(&format!("{}\n", lines.text()));
    }
    text.push_str("\nRanking\n");
    for (name, reason) in reasons(compared, ranks) {
        text.push_str(&format!("{name}: {reason}\n"));
    }
    let warnings = warnings(compared);
    if !warnings.is_empty() {
        text.push_str("\nWarnings\n");
        for warning in warnings {
            text.push_str(&format!("- {warning}\n"));
        }
    }
    text.push_str(
        "\nEstimates from a model, no type approval. High voltages and RF burns: dummy load first; a licence is needed to transmit.",
    );
    text
}
