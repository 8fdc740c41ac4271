//! The next table from a captured pair: page, terminal text and document.

use serde_json::{Value, json};

use super::lookup::lookup_figure;
use super::table_rows;
use crate::map::Control;
use crate::predistort::{HELPS_DB, LoopEnd, StoppedBy};
use crate::report::check::{Request, outcome};
use crate::report::figures::{CloudFigure, SpectrumCurve};
use crate::report::held::{HeldSpectrum, narrowest};
use crate::report::page::{
    CaptionedFigure, CheckRow, Conditions, DataTable, FactGroup, KeyFigure, Page,
};
use crate::report::table::{Align, Table};
use crate::report::text::{quantity, signed};
use crate::study::{ClosedResult, ClosedSide};
use crate::units;

/// What the next table rests on.
const MODEL_LIMITS: [&str; 5] = [
    "The wanted signal is that in front of the table; the front end is taken to apply the table in force exactly as \
     its words say, at the stated level.",
    "What is expected of the next table is the capture with its static part exchanged: memory, noise and whatever \
     the receiver adds are taken to stay as they are. Only the next capture shows what it does.",
    "Spectra and margins are read on the whole compared stretch, frequency offset and drift taken off; the error \
     vector is that of the whole sampled band.",
    "A static table does not undo memory: what lies beside the static map stays.",
    "The highest magnitude seen keeps its control; all others are bent to the straight line through its output.",
];

/// Whether to go on, in a sentence.
fn end_sentence(result: &ClosedResult) -> String {
    match result.end {
        LoopEnd::Helps { expected_db } => format!(
            "The next table helps: what one gain leaves can fall by {expected_db:.2} dB. Load it and capture again."
        ),
        LoopEnd::StoppedHelping {
            by: StoppedBy::Spread,
            expected_db,
        } => format!(
            "A further table has stopped helping: {:.2} dB are to be had, less than {HELPS_DB} dB. What is left is memory and noise, {:.2} dB, and the rounding of the words, {:.2} dB.",
            expected_db.max(0.0),
            result.fit.static_rest_db,
            result.next.rounding_db
        ),
        LoopEnd::StoppedHelping {
            by: StoppedBy::NoProgress,
            expected_db,
        } => format!(
            "A further table has stopped helping: the table in force bettered the one before it by less than {HELPS_DB} dB although {expected_db:.2} dB of static bend are left. Does the front end apply the table as its file says (level, full range, interpolation), is the table deep enough, and does the stage drift? A lower --damping helps where it swings. Of the tables so far the one with the lowest rest is the best."
        ),
    }
}

fn passes(result: &ClosedResult) -> Vec<Vec<String>> {
    result
        .next
        .table
        .passes
        .iter()
        .enumerate()
        .map(|(index, pass)| {
            vec![
                (index + 1).to_string(),
                format!("{:.2} dB", pass.linear_rest_db),
                format!("{:.2} dB", pass.static_rest_db),
            ]
        })
        .collect()
}

/// Number, as captured, as expected.
fn comparison(result: &ClosedResult) -> Vec<[String; 3]> {
    let (before, after) = (&result.before, &result.expected);
    let margin = |side: &ClosedSide, name: &str, set: &Option<String>| {
        side.judgement
            .verdict
            .checks
            .iter()
            .find(|check| check.name == name && check.set == *set)
            .and_then(|check| check.margin_db)
            .map_or("-".to_owned(), |margin| format!("{margin:+.2} dB"))
    };
    let mut rows = vec![[
        "left by one gain".to_owned(),
        format!("{:.2} dB", before.linear_rest_db),
        format!("{:.2} dB", after.linear_rest_db),
    ]];
    for check in &before.judgement.verdict.checks {
        rows.push([
            check.name.clone(),
            margin(before, &check.name, &check.set),
            margin(after, &check.name, &check.set),
        ]);
    }
    for (index, pair) in before.judgement.acpr.iter().enumerate() {
        let text = |side: &ClosedSide| {
            side.judgement
                .acpr
                .get(index)
                .map_or("-".to_owned(), |pair| {
                    format!("{:.2} / {:.2} dB", pair.lower_db, pair.upper_db)
                })
        };
        rows.push([
            format!("ACPR at {}", quantity(pair.offset_hz, "Hz", 4)),
            text(before),
            text(after),
        ]);
    }
    rows.push([
        "peak over mean".to_owned(),
        format!("{:.2} dB", before.envelope.papr_db),
        format!("{:.2} dB", after.envelope.papr_db),
    ]);
    rows
}

fn facts(result: &ClosedResult) -> Vec<FactGroup> {
    let own = |name: &str, value: String| (name.to_owned(), value);
    let (fit, stage, sync) = (&result.fit, &result.next.stage, &result.sync);
    let (low, high) = stage.seen;
    vec![
        FactGroup {
            title: "Captured pair".to_owned(),
            rows: vec![
                own("wanted signal", result.reference.file.clone()),
                own("capture", result.signal.file.clone()),
                own(
                    "table in force",
                    result
                        .request
                        .previous
                        .clone()
                        .unwrap_or_else(|| "none: the magnitude was the control".to_owned()),
                ),
                own(
                    "level",
                    format!("full scale is {} of the range", result.request.level),
                ),
                own("delay", quantity(sync.delay_s, "s", 7)),
                own("frequency offset", signed(sync.frequency_hz, "Hz", 7)),
                own(
                    "clock of the wanted signal against the capture's",
                    format!("{:+.4} millionths", 1e6 * sync.rate_error),
                ),
                own("correlation", format!("{:.6}", sync.correlation)),
                own("samples that counted", fit.samples.to_string()),
                own(
                    "left out as outliers",
                    format!("{:.3} %", 100.0 * fit.left_out),
                ),
            ],
        },
        FactGroup {
            title: "Static output".to_owned(),
            rows: vec![
                own("left by one gain", format!("{:.2} dB", fit.linear_rest_db)),
                own(
                    "left by the static map",
                    format!("{:.2} dB: memory and noise", fit.static_rest_db),
                ),
                own(
                    "left by rounding to words",
                    format!("{:.2} dB, by their steps", result.next.rounding_db),
                ),
                own(
                    "magnitudes seen",
                    format!("{low:.4} to {high:.4} of the range"),
                ),
                own("cells", fit.points.len().to_string()),
                own(
                    "joined with neighbours because the amplitude did not rise",
                    stage.joined.to_string(),
                ),
                own("damping", format!("{}", result.request.next.damping)),
            ],
        },
        FactGroup {
            title: "Next table".to_owned(),
            rows: table_rows(&result.next.table),
        },
    ]
}

/// The spectra as captured, as expected and wanted.
pub fn closed_spectra_figure(result: &ClosedResult) -> CaptionedFigure {
    let lines = &result.before.judgement.lines;
    let spectrum = &result.before.spectrum;
    let resolution_hz = narrowest(lines).map_or(spectrum.enbw_hz, |line| line.bandwidth_hz);
    let known = result.request.measure.scale.watts_a_unit().is_some();
    // Without a scale masks were judged at a mean power of 0 dBm, and curves count from full scale.
    let (unit, curves_db, lines_db) = if known {
        ("dBm", 0.0, 0.0)
    } else {
        (
            "dB against full scale",
            -30.0,
            units::db(result.before.envelope.mean_w),
        )
    };
    let curve = |name: &str, spectrum| {
        let mut curve = SpectrumCurve::in_dbm(name, spectrum, resolution_hz);
        for point in &mut curve.points {
            point.1 += curves_db;
        }
        curve
    };
    let figure = HeldSpectrum {
        lines,
        margins: &result.expected.judgement.mask,
        acpr: &result.before.judgement.acpr,
        occupied_hz: 2.0 * result.occupied_hz,
        range_hz: spectrum.range_hz().1,
        resolution_hz,
        offset_db: lines_db,
    }
    .figure(
        "Spectrum, captured and expected",
        unit,
        vec![
            curve("expected of the next table", &result.expected.spectrum),
            curve("captured", spectrum),
            curve("wanted", &result.wanted_spectrum),
        ],
    )
    .figure();
    CaptionedFigure {
        figure,
        caption: "The capture as it is, and with the static output of the next table in the place of the present one's."
            .to_owned(),
    }
}

/// The stage as the capture shows it.
fn stage_figures(result: &ClosedResult) -> Vec<CaptionedFigure> {
    let stage = &result.next.stage;
    let (low, high) = stage.control;
    let top = stage.output(high);
    let phase = |output: num_complex::Complex64| (output / top).arg().to_degrees();
    let along = |value: &dyn Fn(num_complex::Complex64) -> f64| -> Vec<(f64, f64)> {
        (0..=200)
            .map(|step| low + (high - low) * f64::from(step) / 200.0)
            .map(|control| (control, value(stage.output(control))))
            .collect()
    };
    let cells = |value: &dyn Fn(num_complex::Complex64) -> f64| -> Vec<(f64, f64)> {
        let points = &result.fit.points;
        points
            .iter()
            .map(|point| (point.control, value(point.output)))
            .collect()
    };
    let figure = |title: &str, up: &str, value: &dyn Fn(num_complex::Complex64) -> f64| {
        CloudFigure {
            title: title.to_owned(),
            across: "control, part of the range".to_owned(),
            up: up.to_owned(),
            samples: cells(value),
            line: along(value),
            line_name: "static map, never falling".to_owned(),
        }
        .figure()
    };
    vec![
        CaptionedFigure {
            figure: figure("Stage as captured: amplitude", "output over the gain", &|output| {
                output.norm()
            }),
            caption: "One point a cell of the wanted magnitude, over the control that the table in force gave."
                .to_owned(),
        },
        CaptionedFigure {
            figure: figure("Stage as captured: phase", "phase, degrees", &phase),
            caption: "Against the phase at the highest control.".to_owned(),
        },
    ]
}

fn check_rows(result: &ClosedResult) -> Vec<CheckRow> {
    let checks = &result.before.judgement.verdict.checks;
    checks
        .iter()
        .map(|check| CheckRow {
            name: format!("as captured: {}", check.name),
            outcome: outcome(check.outcome),
            found: check.found.clone().unwrap_or_default(),
            allowed: check.allowed.clone().unwrap_or_default(),
            margin_db: check.margin_db,
            reason: check.reason.clone(),
        })
        .collect()
}

/// The report's page.
pub fn closed_page(result: &ClosedResult, request: &Request) -> Page {
    let right = |name: &str| (name.to_owned(), Align::Right);
    let left = |name: &str| (name.to_owned(), Align::Left);
    let mut figures = vec![
        closed_spectra_figure(result),
        lookup_figure(&result.next.table),
    ];
    figures.extend(stage_figures(result));
    let fit = &result.fit;
    let key = |name: &str, value: String, note: &str| KeyFigure {
        name: name.to_owned(),
        value,
        note: note.to_owned(),
    };
    let (LoopEnd::Helps { expected_db } | LoopEnd::StoppedHelping { expected_db, .. }) = result.end;
    Page {
        title: format!("{}: next table from captures", result.request.next.title),
        subtitle: end_sentence(result),
        headline: None,
        checks: check_rows(result),
        warnings: result.warnings.clone(),
        key_figures: vec![
            key(
                "left by one gain",
                format!("{:.2} dB", fit.linear_rest_db),
                "of the output's power, as captured",
            ),
            key(
                "left by the static map",
                format!("{:.2} dB", fit.static_rest_db),
                "memory and noise: no static table mends it",
            ),
            key(
                "to be had",
                format!("{:.2} dB", expected_db.max(0.0)),
                "by a further table at best, its rounding counted",
            ),
        ],
        figures,
        tables: vec![
            DataTable {
                title: "As captured, and as expected of the next table".to_owned(),
                columns: vec![left(""), right("captured"), right("expected")],
                rows: comparison(result).into_iter().map(Vec::from).collect(),
            },
            DataTable {
                title: "Passes".to_owned(),
                columns: vec![
                    right("capture"),
                    right("left by one gain"),
                    right("left by the static map"),
                ],
                rows: passes(result),
            },
        ],
        facts: facts(result),
        model_limits: MODEL_LIMITS.map(str::to_owned).to_vec(),
        conditions: Conditions {
            command: request.command.clone(),
            version: format!("quietedge {}", env!("CARGO_PKG_VERSION")),
            seed: None,
            inputs: request.inputs.clone(),
        },
    }
}

/// The result for the terminal.
pub fn closed_text(result: &ClosedResult) -> String {
    let word = if result.end.helps() {
        "HELPS"
    } else {
        "STOPPED HELPING"
    };
    let mut text = format!(
        "{word}: {}, capture {}\n{}\n",
        result.request.next.title,
        result.next.table.passes.len(),
        end_sentence(result)
    );
    let mut table = Table::new([
        ("", Align::Left),
        ("captured", Align::Right),
        ("expected", Align::Right),
    ]);
    for row in comparison(result) {
        table.row(row);
    }
    text.push_str(&format!("\nBefore and after\n{}\n", table.text()));
    let mut table = Table::new([
        ("capture", Align::Right),
        ("left by one gain", Align::Right),
        ("left by the static map", Align::Right),
    ]);
    for row in passes(result) {
        table.row(row);
    }
    text.push_str(&format!("\nPasses\n{}\n", table.text()));
    for group in facts(result) {
        let mut table = Table::new([("", Align::Left), ("", Align::Left)]);
        for (name, value) in group.rows {
            table.row([name, value]);
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

/// The document of `quietedge predistort --from-capture`.
pub fn closed_document(result: &ClosedResult) -> Value {
    let side = |side: &ClosedSide| {
        let limits = &result.request.measure.limits;
        json!({
            "linear_rest_db": side.linear_rest_db,
            "papr_db": side.envelope.papr_db,
            "acpr": side.judgement.acpr,
            "mask": side.judgement.mask,
            "verdict": (!limits.is_empty()).then_some(&side.judgement.verdict),
        })
    };
    let (table, fit, stage) = (&result.next.table, &result.fit, &result.next.stage);
    let size = table.lookup.size();
    json!({
        "signal": result.signal,
        "reference": result.reference,
        "alignment": result.sync,
        "level": result.request.level,
        "previous": result.request.previous,
        "damping": result.request.next.damping,
        "end": result.end,
        "helps": result.end.helps(),
        "passes": table.passes,
        "fit": {
            "linear_rest_db": fit.linear_rest_db,
            "static_rest_db": fit.static_rest_db,
            "rounding_db": result.next.rounding_db,
            "left_out": fit.left_out,
            "samples": fit.samples,
            "seen": stage.seen,
            "joined": stage.joined,
            "points": fit.points.iter().map(|point| json!({
                "magnitude": point.magnitude,
                "control": point.control,
                "output": { "re": point.output.re, "im": point.output.im },
                "spread": point.spread,
                "samples": point.samples,
            })).collect::<Vec<_>>(),
        },
        "captured": side(&result.before),
        "expected": side(&result.expected),
        "table": {
            "size": size,
            "spacing": table.lookup.spacing(),
            "between": table.lookup.between(),
            "rate": table.lookup.rate(),
            "stored_bits": size.stored_bits(),
            "control": table.control.name(),
            "full_control": table.full_control,
            "full_control_v": (table.control == Control::Supply).then_some(table.full_control),
            "entries": table.counts(),
        },
        "warnings": result.warnings,
    })
}
