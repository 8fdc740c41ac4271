//! Several schemes side by side: table, ranking, pictures, document.

use serde_json::{Value, json};

use super::check::{Request, headline, spectrum_view};
use super::figures::SpectrumCurve;
use super::page::{CaptionedFigure, Conditions, DataTable, FactGroup, Outcome, Page};
use super::picture::{AxisSpec, Backdrop, Chart, Curve, Figure, Panel};
use super::scheme::scheme_rows;
use super::table::{Align, Table};
use super::text::quantity;
use crate::study::{CheckResult, Rank};
use crate::verdict;

/// Headers of the table.
const COLUMNS: [(&str, Align); 10] = [
    ("", Align::Right),
    ("scheme", Align::Left),
    ("power", Align::Right),
    ("efficiency", Align::Right),
    ("stage alone", Align::Right),
    ("EVM", Align::Right),
    ("worst ACPR", Align::Right),
    ("mask margin", Align::Right),
    ("switch peak", Align::Right),
    ("verdict", Align::Left),
];

fn word(result: &CheckResult) -> &'static str {
    match result.judgement.verdict.outcome {
        verdict::Outcome::Within => Outcome::Within.word(),
        verdict::Outcome::Outside => Outcome::Outside.word(),
        verdict::Outcome::Undecided => Outcome::Undecided.word(),
    }
}

/// The worst neighbour, dB.
fn worst_acpr_db(result: &CheckResult) -> Option<f64> {
    let rows = result.metrics.acpr.iter();
    rows.flat_map(|pair| [pair.lower_db, pair.upper_db])
        .reduce(f64::max)
}

/// The highest drain voltage on the part of the map that the signal uses, V.
fn switch_peak_v(result: &CheckResult) -> Option<f64> {
    let bins = result.control_density.len() as f64;
    let highest = result
        .control_density
        .iter()
        .rposition(|&part| part > 0.0)?;
    let limit = (highest as f64 + 1.0) / bins * result.study.full_control();
    let points = result.map.points().iter();
    points
        .filter(|point| point.control <= limit * (1.0 + 1e-9))
        .filter_map(|point| point.switch_peak_v)
        .reduce(f64::max)
}

fn row(place: usize, index: usize, result: &CheckResult) -> Vec<String> {
    let metrics = &result.metrics;
    let percent = |part: Option<f64>| {
        part.map_or("not known".to_owned(), |part| {
            format!("{:.1} %", 100.0 * part)
        })
    };
    let margins = metrics.mask.iter();
    let worst = margins.min_by(|a, b| a.margin_db.total_cmp(&b.margin_db));
    vec![
        (place + 1).to_string(),
        name(index, result),
        format!("{:.2} dBm", metrics.power_dbm),
        percent(metrics.efficiency),
        percent(metrics.stage_efficiency),
        format!("{:.2} %", metrics.evm_percent),
        worst_acpr_db(result).map_or("-".to_owned(), |db| format!("{db:.1} dB")),
        worst.map_or("-".to_owned(), |worst| {
            format!(
                "{:+.2} dB at {}",
                worst.margin_db,
                quantity(worst.worst_hz * worst.side.sign(), "Hz", 4)
            )
        }),
        switch_peak_v(result).map_or("-".to_owned(), |volt| quantity(volt, "V", 3)),
        word(result).to_owned(),
    ]
}

/// The scheme with its number among those compared.
fn name(index: usize, result: &CheckResult) -> String {
    format!("{} ({})", result.scheme().name(), index + 1)
}

fn rows(results: &[CheckResult], ranks: &[Rank]) -> Vec<Vec<String>> {
    ranks
        .iter()
        .enumerate()
        .map(|(place, rank)| row(place, rank.index, &results[rank.index]))
        .collect()
}

fn reasons(results: &[CheckResult], ranks: &[Rank]) -> Vec<(String, String)> {
    ranks
        .iter()
        .enumerate()
        .map(|(place, rank)| {
            let name = name(rank.index, &results[rank.index]);
            (format!("{}. {name}", place + 1), rank.reason.clone())
        })
        .collect()
}

fn warnings(results: &[CheckResult]) -> Vec<String> {
    let pairs = results.iter().enumerate();
    pairs
        .flat_map(|(index, result)| {
            let own = result.warnings.iter();
            own.map(move |warning| format!("{}: {warning}", name(index, result)))
        })
        .collect()
}

/// The comparison for the terminal.
pub fn text(results: &[CheckResult], ranks: &[Rank]) -> String {
    let mut table = Table::new(COLUMNS);
    for row in rows(results, ranks) {
        table.row(row);
    }
    let mut text = format!("{}\n\nRanking\n", table.text());
    for (name, reason) in reasons(results, ranks) {
        text.push_str(&format!("{name}: {reason}\n"));
    }
    let warnings = warnings(results);
    if !warnings.is_empty() {
        text.push_str("\nWarnings\n");
        for warning in warnings {
            text.push_str(&format!("- {warning}\n"));
        }
    }
    text
}

/// Spectra of all schemes, masks of the first.
pub fn spectrum_figure(results: &[CheckResult]) -> Option<CaptionedFigure> {
    let (mut view, _) = spectrum_view(results.first()?);
    view.title = "Output spectra".to_owned();
    view.worst.clear();
    view.curves = results
        .iter()
        .enumerate()
        .map(|(index, result)| {
            SpectrumCurve::in_dbm(
                name(index, result),
                &result.output_spectrum,
                view.resolution_hz,
            )
        })
        .collect();
    Some(CaptionedFigure {
        figure: view.figure(),
        caption: "Mean output spectra of all schemes, with the masks at the first one's levels."
            .to_owned(),
    })
}

/// Efficiency at constant output over back-off from each scheme's full output, the signal's density behind.
pub fn backoff_figure(results: &[CheckResult]) -> CaptionedFigure {
    let mut panel = Panel::new(AxisSpec::plain("efficiency", "%"), 240.0);
    for (index, result) in results.iter().enumerate() {
        let full_w = result.map.full_amplitude_v().powi(2) / (2.0 * result.map.load_ohm());
        let modulator = result.scheme().modulator();
        let mut points: Vec<(f64, f64)> = result
            .map
            .points()
            .iter()
            .filter_map(|point| {
                let out_w = point.output_v.norm_sqr() / (2.0 * result.map.load_ohm());
                let backoff_db = 10.0 * (out_w / full_w).log10();
                let drawn_w = point.supply_v * point.supply_a? / modulator.efficiency
                    + modulator.idle_w
                    + point.driver_w.unwrap_or(0.0);
                (backoff_db > -25.0).then_some((backoff_db, 100.0 * out_w / drawn_w))
            })
            .collect();
        points.sort_by(|a, b| a.0.total_cmp(&b.0));
        panel
            .curves
            .push(Curve::numbered(index, &name(index, result), points));
    }
    if let Some(first) = results.first() {
        let ccdf = first.wanted_envelope.ccdf_points(0.5);
        let over = first.signal.rms * first.study.signal.level;
        let mean_db = 20.0 * over.log10();
        let points = ccdf
            .windows(2)
            .map(|pair| {
                (
                    mean_db + 0.5 * (pair[0].0 + pair[1].0),
                    pair[0].1 - pair[1].1,
                )
            })
            .collect();
        panel.backdrops.push(Backdrop {
            name: "density of the signal".to_owned(),
            points,
        });
    }
    let description = "Efficiency of all schemes over back-off from full output.".to_owned();
    let figure = Figure::new(
        description,
        Chart {
            title: "Efficiency over output".to_owned(),
            across: AxisSpec::plain("output below full output", "dB"),
            shades: Vec::new(),
            panels: vec![panel],
        },
    );
    CaptionedFigure {
        figure,
        caption: "Efficiency at constant output, supply and driver included, over the output below each scheme's own full output; levels are shown at full supply only."
            .to_owned(),
    }
}

/// The report's page.
pub fn page(results: &[CheckResult], ranks: &[Rank], request: &Request) -> Page {
    let best = ranks.first().map(|rank| &results[rank.index]);
    let mut figures: Vec<CaptionedFigure> = spectrum_figure(results).into_iter().collect();
    figures.push(backoff_figure(results));
    let mut facts = vec![FactGroup {
        title: "Ranking".to_owned(),
        rows: reasons(results, ranks),
    }];
    facts.extend(results.iter().enumerate().map(|(index, result)| FactGroup {
        title: name(index, result),
        rows: scheme_rows(result.scheme()),
    }));
    Page {
        title: results
            .first()
            .map_or_else(String::new, |result| result.study.title.clone()),
        subtitle: "Schemes side by side; the headline is that of the first in the ranking."
            .to_owned(),
        headline: best.map(|result| {
            let mut headline = headline(result);
            headline.reason = format!("scheme {}: {}", result.scheme().name(), headline.reason);
            headline
        }),
        warnings: warnings(results),
        figures,
        tables: vec![DataTable {
            title: "Schemes".to_owned(),
            columns: COLUMNS
                .map(|(name, align)| (name.to_owned(), align))
                .to_vec(),
            rows: rows(results, ranks),
        }],
        facts,
        conditions: Conditions {
            command: request.command.clone(),
            version: format!("quietedge {}", env!("CARGO_PKG_VERSION")),
            seed: results.iter().find_map(|result| result.scheme().seed()),
            inputs: request.inputs.clone(),
        },
        ..Page::default()
    }
}

/// The document of `quietedge compare`.
pub fn document(results: &[CheckResult], ranks: &[Rank]) -> Value {
    let schemes: Vec<Value> = results
        .iter()
        .map(|result| {
            let mut value = super::documents::check_document(result);
            value["scheme_settings"] = json!(result.scheme());
            value["worst_acpr_db"] = json!(worst_acpr_db(result));
            value["switch_peak_v"] = json!(switch_peak_v(result));
            value
        })
        .collect();
    json!({ "schemes": schemes, "ranking": ranks })
}
