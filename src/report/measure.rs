//! The result of a measurement as a page, as text for the terminal and as a document.

use serde_json::{Value, json};

use super::check::Request;
use super::figures::{
    CcdfCurve, CcdfFigure, CloudFigure, ConstellationFigure, MaskLine, SpectrumCurve,
    SpectrumFigure, WorstPoint,
};
use super::page::{
    CaptionedFigure, CheckRow, Conditions, DataTable, FactGroup, Headline, KeyFigure, Outcome, Page,
};
use super::table::{Align, Table};
use super::text::{quantity, signed};
use crate::limits::Obtained;
use crate::metrics::Spectrum;
use crate::signal::Modulation;
use crate::study::{MeasureResult, Scale, SignalFacts};
use crate::units;
use crate::verdict::{self, Check};

/// What a measurement leaves out.
const MODEL_LIMITS: [&str; 4] = [
    "What the receiver adds (its noise, spurs, response and clock) is part of every number.",
    "Where a reference is given, its rate, frequency offset, drift, delay and one complex gain are taken off \
     before anything is read, the spectrum included.",
    "The error vector is that of the waveform in the stated band, not that of equalized symbols, unless it says so.",
    "Peaks between samples are not counted; harmonics of the carrier are not in the capture.",
];

fn outcome(outcome: verdict::Outcome) -> Outcome {
    match outcome {
        verdict::Outcome::Within => Outcome::Within,
        verdict::Outcome::Outside => Outcome::Outside,
        verdict::Outcome::Undecided => Outcome::Undecided,
    }
}

fn margin(check: &Check) -> f64 {
    check.margin_db.unwrap_or(f64::NEG_INFINITY)
}

fn reason(check: &Check) -> String {
    let doubt = match check.obtained {
        Some(Obtained::Memory) => " Limit recalled from memory: check it against the document.",
        Some(Obtained::SecondHand) => " Limit read second-hand: check it against the document.",
        _ => "",
    };
    format!("{}{doubt}", check.reason)
}

/// True where limits were named.
fn judged(result: &MeasureResult) -> bool {
    !result.request.limits.is_empty()
}

fn check_rows(result: &MeasureResult) -> Vec<CheckRow> {
    if !judged(result) {
        return Vec::new();
    }
    let mut checks: Vec<&Check> = result.judgement.verdict.checks.iter().collect();
    checks.sort_by(|a, b| margin(a).total_cmp(&margin(b)));
    checks
        .into_iter()
        .map(|check| CheckRow {
            name: check.name.clone(),
            outcome: outcome(check.outcome),
            margin_db: check.margin_db,
            reason: reason(check),
            ..CheckRow::default()
        })
        .collect()
}

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
        figures: figures(result),
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

/// Name, value and remark of the numbers that matter most.
fn key_rows(result: &MeasureResult) -> Vec<[String; 3]> {
    let metrics = &result.metrics;
    let row = |name: &str, value: String, note: String| [name.to_owned(), value, note];
    let mut rows = vec![match metrics.power_dbm {
        Some(power_dbm) => row(
            "power",
            format!("{power_dbm:.2} dBm"),
            format!(
                "mean; peak envelope {:.2} dBm",
                metrics.peak_power_dbm.unwrap_or(f64::NAN)
            ),
        ),
        None => row(
            "power",
            format!("{:.2} dB", metrics.power_dbfs),
            "mean, against full scale; absolute power is not known".to_owned(),
        ),
    }];
    let tail = |index: usize| {
        metrics.ccdf_db[index].map_or("-".to_owned(), |level| format!("{level:.2} dB"))
    };
    rows.push(row(
        "peak over mean",
        format!("{:.2} dB", metrics.papr_db),
        format!("1 % of the time above {}, 0.1 % above {}", tail(1), tail(2)),
    ));
    rows.push(row(
        "occupied bandwidth",
        quantity(metrics.occupied_hz, "Hz", 4),
        format!(
            "holds 99 % of the power, centred {}",
            signed(metrics.occupied_centre_hz, "Hz", 4)
        ),
    ));
    if let Some(symbols) = &result.symbols {
        rows.push(row(
            "EVM of symbols",
            format!("{:.3} %", symbols.evm_percent),
            format!(
                "RMS of {} points; 95 % below {:.2} %, peak {:.2} %; sent points {}",
                symbols.points,
                symbols.evm_p95_percent,
                symbols.evm_peak_percent,
                if symbols.sent_from == "reference" {
                    "from the reference"
                } else {
                    "decided"
                }
            ),
        ));
    }
    if let Some(evm) = metrics.waveform_evm_percent {
        let band = metrics
            .evm_band_hz
            .map_or("all sampled".to_owned(), |band| quantity(band, "Hz", 4));
        rows.push(row(
            "EVM of the waveform",
            format!("{evm:.3} %"),
            match metrics.evm_peak_percent {
                Some(peak) if result.symbols.is_none() => {
                    format!("RMS in {band}; peak {peak:.2} %")
                }
                _ => format!("RMS in {band}"),
            },
        ));
    }
    if let Some(nmse) = metrics.nmse_db {
        rows.push(row(
            "NMSE",
            format!("{nmse:.2} dB"),
            "in all of the sampled band".to_owned(),
        ));
    }
    if let Some(bend) = &result.bend {
        rows.push(row(
            "beyond a static map",
            format!("{:.2} dB", bend.static_rest_db),
            format!(
                "memory and noise; one gain leaves {:.2} dB",
                bend.linear_rest_db
            ),
        ));
    }
    if let Some(averaged) = &result.averaged {
        rows.push(row(
            "EVM of the mean period",
            format!("{:.3} %", averaged.evm_percent),
            format!(
                "over {} periods; {:.3} % changes from period to period",
                averaged.periods, averaged.noise_percent
            ),
        ));
    }
    for pair in &metrics.acpr {
        rows.push(row(
            &format!("ACPR at {}", quantity(pair.offset_hz, "Hz", 4)),
            format!("{:.2} / {:.2} dB", pair.lower_db, pair.upper_db),
            format!("lower / upper, in {}", quantity(pair.bandwidth_hz, "Hz", 4)),
        ));
    }
    rows
}

fn figures(result: &MeasureResult) -> Vec<CaptionedFigure> {
    let mut figures = vec![measured_spectrum_figure(result)];
    figures.extend(constellation_figure(result));
    figures.extend(cloud_figures(result));
    let mut curves = vec![CcdfCurve {
        name: "capture".to_owned(),
        points: result.envelope.ccdf_points(0.1),
    }];
    if let Some(envelope) = &result.reference_envelope {
        curves.push(CcdfCurve {
            name: "reference".to_owned(),
            points: envelope.ccdf_points(0.1),
        });
    }
    figures.push(CaptionedFigure {
        figure: CcdfFigure {
            title: "Distribution of power".to_owned(),
            curves,
        }
        .figure(),
        caption: "How much of the time the power lies above its mean by how much (CCDF)."
            .to_owned(),
    });
    figures
}

/// The spectrum in the measuring bandwidth of the tightest mask, in dBm where the scale is known, else
/// against full scale.
pub fn measured_spectrum_figure(result: &MeasureResult) -> CaptionedFigure {
    let lines = &result.judgement.lines;
    let worst = result
        .metrics
        .mask
        .iter()
        .min_by(|a, b| a.margin_db.total_cmp(&b.margin_db));
    let shown = worst
        .and_then(|worst| {
            lines
                .iter()
                .find(|line| line.set == worst.set && line.bandwidth_hz == worst.bandwidth_hz)
        })
        .or(lines.first());
    let resolution_hz = shown.map_or(result.spectrum.enbw_hz, |line| line.bandwidth_hz);
    // Without a scale masks were judged at a mean power of 0 dBm, and curves count from full scale.
    let known = result.metrics.power_dbm.is_some();
    let (unit, curve_offset, line_offset) = if known {
        ("dBm", 30.0, 0.0)
    } else {
        ("dB against full scale", 0.0, result.metrics.power_dbfs)
    };
    let curve = |name: &str, spectrum: &Spectrum| SpectrumCurve {
        name: name.to_owned(),
        points: spectrum
            .mean_w_per_hz
            .iter()
            .enumerate()
            .map(|(bin, density)| {
                (
                    spectrum.offset_hz(bin),
                    units::db(density * resolution_hz) + curve_offset,
                )
            })
            .collect(),
    };
    let mut curves = vec![curve("capture", &result.spectrum)];
    if let Some(sent) = &result.reference_spectrum {
        curves.push(curve("reference", sent));
    }
    let moved = |bandwidth_hz: f64| units::db(resolution_hz / bandwidth_hz) + line_offset;
    let masks = lines
        .iter()
        .map(|line| MaskLine {
            name: line.set.clone(),
            points: line
                .points
                .iter()
                .map(|&(offset_hz, dbm)| (offset_hz, dbm + moved(line.bandwidth_hz)))
                .collect(),
        })
        .collect();
    let marks = worst.map(|worst| WorstPoint {
        offset_hz: worst.worst_hz * worst.side.sign(),
        level: worst.level_db
            + match worst.unit {
                verdict::Unit::Dbm => 0.0,
                verdict::Unit::Decibel => worst.reference_dbm.unwrap_or(f64::NAN),
            }
            + moved(worst.bandwidth_hz),
        margin_db: worst.margin_db,
    });
    let corner = lines
        .iter()
        .filter_map(|line| line.points.get(line.points.len().saturating_sub(2)))
        .map(|point| point.0.abs())
        .fold(0.0, f64::max);
    let rows = result
        .metrics
        .acpr
        .iter()
        .map(|pair| pair.offset_hz + pair.bandwidth_hz)
        .fold(0.0, f64::max);
    let reach = (1.6 * corner)
        .max(rows)
        .max(3.0 * result.metrics.occupied_hz);
    let figure = SpectrumFigure {
        title: "Spectrum".to_owned(),
        level_unit: unit.to_owned(),
        resolution_hz,
        curves,
        masks,
        worst: marks.into_iter().collect(),
        span_hz: Some(reach.min(result.spectrum.range_hz().1)),
    }
    .figure();
    let caption = format!(
        "Mean levels in {}{}.",
        quantity(resolution_hz, "Hz", 4),
        if lines.is_empty() {
            ""
        } else {
            "; lines of masks with other bandwidths are moved as noise would be"
        }
    );
    CaptionedFigure { figure, caption }
}

/// Received points, where the format is known.
fn constellation_figure(result: &MeasureResult) -> Option<CaptionedFigure> {
    let (symbols, format) = (result.symbols.as_ref()?, result.request.format?);
    let modulation = format.modulation();
    let mut sent: Vec<_> = (0..1u32 << modulation.bits())
        .map(|word| modulation.point(word))
        .collect();
    if modulation == Modulation::Pi4Dqpsk {
        let turn = num_complex::Complex64::cis(std::f64::consts::FRAC_PI_4);
        sent.extend(sent.clone().iter().map(|point| point * turn));
    }
    let figure = ConstellationFigure {
        title: "Constellation".to_owned(),
        received: symbols.constellation.clone(),
        sent,
    }
    .figure();
    Some(CaptionedFigure {
        figure,
        caption: format!(
            "Received points over their gain; EVM {:.3} % RMS of {} points.",
            symbols.evm_percent, symbols.points
        ),
    })
}

/// Amplitude over amplitude and phase over amplitude.
fn cloud_figures(result: &MeasureResult) -> Vec<CaptionedFigure> {
    let Some(bend) = &result.bend else {
        return Vec::new();
    };
    let amplitude = CloudFigure {
        title: "Amplitude over amplitude (AM-AM)".to_owned(),
        across: "reference amplitude, share of full scale".to_owned(),
        up: "capture's amplitude over the gain".to_owned(),
        samples: bend.pairs.iter().map(|pair| (pair[0], pair[1])).collect(),
        line: bend
            .map
            .iter()
            .map(|point| (point.amplitude, point.output))
            .collect(),
        line_name: "static map, never falling".to_owned(),
    };
    // Close to zero amplitude phases are noise.
    let least = 0.05 * bend.map.last().map_or(0.0, |point| point.amplitude);
    let phase = CloudFigure {
        title: "Phase over amplitude (AM-PM)".to_owned(),
        across: "reference amplitude, share of full scale".to_owned(),
        up: "capture's phase, degrees".to_owned(),
        samples: bend
            .pairs
            .iter()
            .filter(|pair| pair[0] > least)
            .map(|pair| (pair[0], pair[2]))
            .collect(),
        line: bend
            .map
            .iter()
            .filter(|point| point.amplitude > least)
            .map(|point| (point.amplitude, point.phase_deg))
            .collect(),
        line_name: "static map".to_owned(),
    };
    vec![
        CaptionedFigure {
            figure: amplitude.figure(),
            caption: format!(
                "The map explains all but {:.1} dB of the power; what lies beside it is memory and noise.",
                bend.static_rest_db
            ),
        },
        CaptionedFigure {
            figure: phase.figure(),
            caption: "Phase against the linear gain's; amplitudes below 5 % are left out."
                .to_owned(),
        },
    ]
}

fn tables(result: &MeasureResult) -> Vec<DataTable> {
    if result.metrics.mask.is_empty() {
        return Vec::new();
    }
    let right = |name: &str| (name.to_owned(), Align::Right);
    vec![DataTable {
        title: "Mask segments".to_owned(),
        columns: vec![
            ("set and side".to_owned(), Align::Left),
            right("offsets"),
            right("margin"),
            right("tightest at"),
            right("in"),
        ],
        rows: result
            .metrics
            .mask
            .iter()
            .map(|margin| {
                vec![
                    format!("{}, {}", margin.set, margin.side.word()),
                    format!(
                        "{} to {}",
                        quantity(margin.from_hz, "Hz", 5),
                        quantity(margin.to_hz, "Hz", 5)
                    ),
                    format!("{:+.2} dB", margin.margin_db),
                    quantity(margin.worst_hz, "Hz", 5),
                    quantity(margin.bandwidth_hz, "Hz", 4),
                ]
            })
            .collect(),
    }]
}

fn facts(result: &MeasureResult) -> Vec<FactGroup> {
    let own = |name: &str, value: String| (name.to_owned(), value);
    let of = |title: &str, signal: &SignalFacts| FactGroup {
        title: title.to_owned(),
        rows: vec![
            own("file", signal.file.clone()),
            own("rate", quantity(signal.rate_hz, "Hz", 9)),
            own(
                "length",
                format!(
                    "{} samples, {}",
                    signal.samples,
                    quantity(signal.duration_s, "s", 4)
                ),
            ),
            own("peak", format!("{:.4} of full scale", signal.peak)),
        ],
    };
    let mut groups = vec![of("Capture", &result.signal)];
    if let Some(sent) = &result.reference {
        groups.push(of("Reference", sent));
    }
    if let Some(sync) = &result.sync {
        groups.push(FactGroup {
            title: "Taken off before anything was read".to_owned(),
            rows: vec![
                own("delay", quantity(sync.delay_s, "s", 7)),
                own(
                    "clock of the reference against the capture's",
                    format!("{:+.4} millionths", 1e6 * sync.rate_error),
                ),
                own(
                    "frequency offset",
                    format!(
                        "{}, known to {}",
                        signed(sync.frequency_hz, "Hz", 7),
                        quantity(sync.frequency_deviation_hz, "Hz", 2)
                    ),
                ),
                own(
                    "drift",
                    format!("{}/s", signed(sync.drift_hz_per_s, "Hz", 4)),
                ),
                own(
                    "gain",
                    format!(
                        "{:.3} dB at {:.2} deg",
                        2.0 * units::db(sync.gain.norm()),
                        sync.gain.arg().to_degrees()
                    ),
                ),
                own("correlation", format!("{:.6}", sync.correlation)),
                own(
                    "slow phase noise",
                    format!("{:.3} deg RMS", sync.slow_phase_deg),
                ),
                own("samples compared", format!("{} to {}", sync.from, sync.to)),
            ],
        });
    }
    groups.push(FactGroup {
        title: "Spectrum".to_owned(),
        rows: vec![
            own("segments", result.spectrum.segments.to_string()),
            own(
                "noise bandwidth",
                quantity(result.spectrum.enbw_hz, "Hz", 4),
            ),
            own(
                "scale",
                match result.request.scale {
                    Scale::Unknown => "not stated: only ratios are known".to_owned(),
                    Scale::FullScale { full_scale_w } => format!(
                        "a constant magnitude of 1 is {:.2} dBm",
                        units::dbm_from_watt(full_scale_w)
                    ),
                    Scale::Volts { load_ohm } => {
                        format!("peak volts over {}", quantity(load_ohm, "ohm", 4))
                    }
                },
            ),
        ],
    });
    groups
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
        "averaged": result.averaged,
        "format": result.request.format,
        "symbols": result.symbols,
        "verdict": judged(result).then_some(&result.judgement.verdict),
        "warnings": result.warnings,
    })
}
