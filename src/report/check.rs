//! The result of a check as a page and as text for the terminal.

use super::figures::{
    BendCurve, BendFigure, CcdfCurve, CcdfFigure, EnvelopeCurve, EnvelopeFigure, MaskLine,
    SpectrumCurve, SpectrumFigure, WorstPoint,
};
use super::page::{
    CaptionedFigure, CheckRow, Conditions, DataTable, FactGroup, Headline, KeyFigure, Outcome, Page,
};
use super::picture::Figure;
use super::stage::{control_quantity, orbit_rows, phases_deg, waveform_figure};
use super::table::{Align, Table};
use super::text::quantity;
use crate::limits::Detector;
use crate::map::Control;
use crate::study::{CheckResult, Hardware};
use crate::units;
use crate::verdict::{self, Check, MaskMargin};

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

/// What the model leaves out of every check by map.
const MODEL_LIMITS: [&str; 4] = [
    "By map: the stage is taken to settle at once to the orbit of the present supply. Energy stored in its feed \
     and network, and so memory, is left out; the settling time in the facts says how long that is.",
    "The modulator is a chain of dead time, converter, Butterworth filter, slew limit and ripple; its efficiency is \
     one number plus idle power, whatever it delivers.",
    "The error vector is that of the waveform in the stated band after one complex gain and one delay were taken off, \
     not that of equalized symbols.",
    "Harmonics of the carrier are not part of the masks.",
];

/// What it leaves out, the stage's own model included.
fn model_limits(result: &CheckResult) -> Vec<String> {
    let mut limits: Vec<String> = MODEL_LIMITS.iter().map(|text| (*text).to_owned()).collect();
    let Hardware::Stage(stage) = &result.study.hardware else {
        return limits;
    };
    if stage.is_curved() {
        let parts = [
            (
                stage.drain_curve.is_some(),
                "capacitance that depends on the drain voltage",
            ),
            (stage.switch.diode.is_some(), "a diode"),
            (stage.gate_coupling_f > 0.0, "gate-drain coupling"),
            (
                stage.switch.knee.is_some(),
                "a limit of the closed switch's current",
            ),
        ];
        let present: Vec<&str> = parts
            .iter()
            .filter(|part| part.0)
            .map(|part| part.1)
            .collect();
        limits.insert(
            1,
            format!(
                "The stage is modelled with {}. It opens and closes at once, half-way up the gate's edges where \
                 these are given; the diode has no stored charge, no capacitance loses energy, and temperature is \
                 left out.",
                present.join(", ")
            ),
        );
    } else {
        limits.insert(
            1,
            "The stage is linear between switching instants: fixed capacitances, a switch with one closed resistance \
             that opens and closes at once, no diode, no gate coupling, no temperature. Its supply map is therefore \
             straight; what bends the signal here are the floor, the modulator and the paths."
                .to_owned(),
        );
    }
    limits.insert(
        2,
        if stage.driver.gate.is_some() {
            "Driver power is gate charge at the swing and the charge through the gate-drain coupling, drawn from a \
             rail at the swing; losses inside the driver are left out."
                .to_owned()
        } else {
            "No driver power is counted.".to_owned()
        },
    );
    limits
}

/// The report's page.
pub fn page(result: &CheckResult, request: &Request) -> Page {
    let study = &result.study;
    Page {
        title: study.title.clone(),
        subtitle: subtitle(result),
        headline: Some(headline(result)),
        checks: check_rows(result),
        warnings: result.warnings.iter().map(ToString::to_string).collect(),
        key_figures: key_figures(result),
        figures: figures(result),
        tables: tables(result),
        facts: facts(result),
        model_limits: model_limits(result),
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

fn check_rows(result: &CheckResult) -> Vec<CheckRow> {
    let mut checks: Vec<&Check> = result.judgement.verdict.checks.iter().collect();
    checks.sort_by(|a, b| {
        let margin = |check: &Check| check.margin_db.unwrap_or(f64::NEG_INFINITY);
        margin(a).total_cmp(&margin(b))
    });
    checks
        .into_iter()
        .map(|check| CheckRow {
            name: check.name.clone(),
            outcome: outcome(check.outcome),
            found: check.found.clone().unwrap_or_default(),
            allowed: check.allowed.clone().unwrap_or_default(),
            margin_db: check.margin_db,
            reason: check.reason.clone(),
        })
        .collect()
}

fn percent(fraction: Option<f64>) -> String {
    fraction.map_or("not known".to_owned(), |fraction| {
        format!("{:.1} %", 100.0 * fraction)
    })
}

/// Name, value and remark of the numbers that matter most.
fn key_rows(result: &CheckResult) -> Vec<[String; 3]> {
    let metrics = &result.metrics;
    let row = |name: &str, value: String, note: String| [name.to_owned(), value, note];
    let band = metrics
        .evm_band_hz
        .map_or("all sampled".to_owned(), |band| quantity(band, "Hz", 4));
    let mut rows = vec![
        row(
            "output power",
            format!("{:.2} dBm", metrics.power_dbm),
            format!(
                "{} mean, {} peak envelope",
                quantity(units::watt_from_dbm(metrics.power_dbm), "W", 3),
                quantity(units::watt_from_dbm(metrics.peak_power_dbm), "W", 3)
            ),
        ),
        row(
            "peak over mean",
            format!("{:.2} dB", metrics.papr_db),
            "at the output".to_owned(),
        ),
        row(
            "efficiency",
            percent(metrics.efficiency),
            format!(
                "over this signal, modulator included; the stage alone {}",
                percent(metrics.stage_efficiency)
            ),
        ),
        row(
            "EVM",
            format!("{:.2} %", metrics.evm_percent),
            match metrics.evm_p95_percent {
                Some(p95) => format!(
                    "RMS of symbols; 95 % below {p95:.2} %, peak {:.2} %; of the waveform in {band} {:.2} %",
                    metrics.evm_peak_percent, metrics.waveform_evm_percent
                ),
                None => format!("RMS in {band}; peak {:.2} %", metrics.evm_peak_percent),
            },
        ),
        row(
            "NMSE",
            format!("{:.1} dB", metrics.nmse_db),
            "in all of the sampled band".to_owned(),
        ),
        row(
            "occupied bandwidth",
            quantity(metrics.occupied_hz, "Hz", 4),
            "holds 99 % of the power".to_owned(),
        ),
    ];
    for pair in &metrics.acpr {
        rows.push(row(
            &format!("ACPR at {}", quantity(pair.offset_hz, "Hz", 4)),
            format!("{:.1} / {:.1} dB", pair.lower_db, pair.upper_db),
            format!("lower / upper, in {}", quantity(pair.bandwidth_hz, "Hz", 4)),
        ));
    }
    rows
}

fn key_figures(result: &CheckResult) -> Vec<KeyFigure> {
    key_rows(result)
        .into_iter()
        .map(|[name, value, note]| KeyFigure { name, value, note })
        .collect()
}

fn figures(result: &CheckResult) -> Vec<CaptionedFigure> {
    let mut figures = vec![
        spectrum_figure(result),
        bend_figure(result),
        notch_figure(result),
        ccdf_figure(result),
    ];
    if let (Some(facts), Hardware::Stage(stage)) = (&result.stage, &result.study.hardware) {
        figures.push(CaptionedFigure {
            figure: waveform_figure(stage, &facts.waveform),
            caption: "One period of the stage at full supply and width, from the instant its switch closes."
                .to_owned(),
        });
    }
    figures
}

/// The tightest mask margin.
fn worst(result: &CheckResult) -> Option<&MaskMargin> {
    result
        .metrics
        .mask
        .iter()
        .min_by(|a, b| a.margin_db.total_cmp(&b.margin_db))
}

/// The spectrum in the narrowest measuring bandwidth of the masks, with its detector.
pub fn spectrum_figure(result: &CheckResult) -> CaptionedFigure {
    let (view, caption) = spectrum_view(result);
    CaptionedFigure {
        figure: view.figure(),
        caption,
    }
}

/// What the spectrum's picture shows, and its caption.
pub(super) fn spectrum_view(result: &CheckResult) -> (SpectrumFigure, String) {
    let lines = &result.judgement.lines;
    let worst = worst(result);
    // The narrowest measuring bandwidth: in a wide one a narrow carrier would be drawn far above its power.
    let shown = lines
        .iter()
        .min_by(|a, b| a.bandwidth_hz.total_cmp(&b.bandwidth_hz));
    let resolution_hz = shown.map_or(result.output_spectrum.enbw_hz, |line| line.bandwidth_hz);
    let peak = shown
        .filter(|line| line.detector == Detector::PeakHold)
        .and_then(|line| {
            result.peak_spectra.iter().min_by(|a, b| {
                let off = |spectrum: &crate::metrics::Spectrum| {
                    (spectrum.enbw_hz - line.bandwidth_hz).abs()
                };
                off(a).total_cmp(&off(b))
            })
        });
    let mut curves = Vec::new();
    if let Some((spectrum, densities)) =
        peak.and_then(|spectrum| Some((spectrum, spectrum.peak_w_per_hz.as_ref()?)))
    {
        curves.push(SpectrumCurve {
            name: "output, peak hold".to_owned(),
            points: densities
                .iter()
                .enumerate()
                .map(|(bin, density)| {
                    (
                        spectrum.offset_hz(bin),
                        units::dbm_from_watt(density * spectrum.enbw_hz),
                    )
                })
                .collect(),
        });
    }
    let mean = if curves.is_empty() {
        "output"
    } else {
        "output, mean"
    };
    curves.push(SpectrumCurve::in_dbm(
        mean,
        &result.output_spectrum,
        resolution_hz,
    ));
    curves.push(SpectrumCurve::in_dbm(
        "wanted",
        &result.wanted_spectrum,
        resolution_hz,
    ));

    // A line in another bandwidth is moved as noise would be.
    let moved = |bandwidth_hz: f64| units::db(resolution_hz / bandwidth_hz);
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
    let view = SpectrumFigure {
        title: "Output spectrum".to_owned(),
        level_unit: "dBm".to_owned(),
        resolution_hz,
        curves,
        masks,
        worst: marks.into_iter().collect(),
        span_hz: span_hz(result),
    };
    let caption = match worst {
        Some(worst) => format!(
            "Levels in {}, the narrowest bandwidth that a mask asks for. The tightest point lies {} from the carrier; lines of masks with other bandwidths are moved as noise would be.",
            quantity(resolution_hz, "Hz", 4),
            quantity(worst.worst_hz, "Hz", 4)
        ),
        None => format!(
            "Levels in {}. No mask was asked for.",
            quantity(resolution_hz, "Hz", 4)
        ),
    };
    (view, caption)
}

/// How far the picture reaches: past the last corner of every mask and four occupied bandwidths.
fn span_hz(result: &CheckResult) -> Option<f64> {
    let corner = result
        .judgement
        .lines
        .iter()
        .filter_map(|line| {
            // The end of an open line is the sampled edge: its second-last corner is the last real one.
            let count = line.points.len();
            line.points
                .get(count.saturating_sub(2))
                .map(|(offset_hz, _)| offset_hz.abs())
        })
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
    Some(reach.min(result.output_spectrum.range_hz().1))
}

/// AM-AM and AM-PM with the signal's density.
pub fn bend_figure(result: &CheckResult) -> CaptionedFigure {
    let map = &result.map;
    let points = map.points();
    let full = result.study.full_control();
    let floor = result.scheme().floor();
    let control = map.control().name();
    let bins = result.control_density.len() as f64;
    let figure = BendFigure {
        title: format!("Output over {control}"),
        control: control_quantity(map.control()),
        curves: vec![BendCurve {
            name: "map".to_owned(),
            control: points.iter().map(|point| point.control).collect(),
            amplitude_v: points.iter().map(|point| point.output_v.norm()).collect(),
            phase_deg: phases_deg(map),
        }],
        density: result
            .control_density
            .iter()
            .enumerate()
            .map(|(bin, &part)| ((bin as f64 + 0.5) / bins * full, part))
            .collect(),
        floor: (floor > 0.0).then_some(floor * full),
    }
    .figure();
    let caption = format!(
        "How output amplitude and phase follow the {control}, and how often the signal's {control} is where."
    );
    CaptionedFigure { figure, caption }
}

/// The envelope against the supply track.
pub fn notch_figure(result: &CheckResult) -> CaptionedFigure {
    let notch = &result.notch;
    let supply = result.map.control() == Control::Supply;
    // Other controls are shown as parts of their range, beside the wanted part of full output.
    let full = if supply {
        result.study.full_control()
    } else {
        1.0
    };
    let curve = |name: &str, values: &[f64]| EnvelopeCurve {
        name: name.to_owned(),
        time_s: notch.time_s.clone(),
        value: values.iter().map(|value| value * full).collect(),
    };
    let figure = EnvelopeFigure {
        title: if supply {
            "Envelope and supply around the deepest notch".to_owned()
        } else {
            format!(
                "Envelope and {} around the deepest notch",
                result.map.control().name()
            )
        },
        quantity: if supply {
            super::figures::Quantity::new("supply", "V")
        } else {
            super::figures::Quantity::new("part of full range", "")
        },
        curves: vec![
            curve("wanted envelope", &notch.wanted),
            curve(
                if supply {
                    "asked of the modulator"
                } else {
                    "asked"
                },
                &notch.asked,
            ),
            curve("at the stage", &notch.control),
        ],
    }
    .figure();
    let caption = if supply {
        "The wanted envelope, what the shaping makes of it, and what the modulator delivers, around the signal's deepest notch."
    } else {
        "The wanted envelope and the control, asked for and at the stage, around the signal's deepest notch."
    };
    CaptionedFigure {
        figure,
        caption: caption.to_owned(),
    }
}

/// Complementary distributions of output and wanted power.
pub fn ccdf_figure(result: &CheckResult) -> CaptionedFigure {
    let curve = |name: &str, envelope: &crate::metrics::EnvelopeFigures| CcdfCurve {
        name: name.to_owned(),
        points: envelope.ccdf_points(0.1),
    };
    let figure: Figure = CcdfFigure {
        title: "Distribution of power".to_owned(),
        curves: vec![
            curve("output", &result.output_envelope),
            curve("wanted", &result.wanted_envelope),
        ],
    }
    .figure();
    let caption =
        "How much of the time the power lies above its mean by how much (CCDF).".to_owned();
    CaptionedFigure { figure, caption }
}

fn tables(result: &CheckResult) -> Vec<DataTable> {
    if result.metrics.mask.is_empty() {
        return Vec::new();
    }
    let right = |name: &str| (name.to_owned(), Align::Right);
    let rows = result
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
                format!("{:.2} {}", margin.level_db, margin.unit.word()),
                format!("{:.2} {}", margin.limit_db, margin.unit.word()),
                quantity(margin.bandwidth_hz, "Hz", 4),
            ]
        })
        .collect();
    vec![DataTable {
        title: "Mask segments".to_owned(),
        columns: vec![
            ("set and side".to_owned(), Align::Left),
            right("offsets"),
            right("margin"),
            right("tightest at"),
            right("reading"),
            right("limit"),
            right("in"),
        ],
        rows,
    }]
}

fn facts(result: &CheckResult) -> Vec<FactGroup> {
    let own = |name: &str, value: String| (name.to_owned(), value);
    let signal = &result.signal;
    let rate = &result.rate;
    let mut groups = Vec::new();
    if let (Some(facts), Hardware::Stage(stage)) = (&result.stage, &result.study.hardware) {
        let mut rows: Vec<_> = orbit_rows(stage, &facts.orbit)
            .into_iter()
            .map(|[name, value, note]| {
                (
                    name,
                    if note.is_empty() {
                        value
                    } else {
                        format!("{value} ({note})")
                    },
                )
            })
            .collect();
        rows.push(own("settling time", quantity(facts.settling_s, "s", 3)));
        groups.push(FactGroup {
            title: "Stage at full supply".to_owned(),
            rows,
        });
    }
    groups.push(FactGroup {
        title: "Signal".to_owned(),
        rows: vec![
            own("file", signal.file.clone()),
            own("rate", quantity(signal.rate_hz, "Hz", 6)),
            own(
                "length",
                format!(
                    "{} samples, {}",
                    signal.samples,
                    quantity(signal.duration_s, "s", 4)
                ),
            ),
            own("peak", format!("{:.4} of full scale", signal.peak)),
            own(
                "peak over mean",
                format!("{:.2} dB", 20.0 * (signal.peak / signal.rms).log10()),
            ),
            own(
                "level",
                format!(
                    "full scale is {} of the supply's range",
                    result.study.signal.level
                ),
            ),
        ],
    });
    groups.push(FactGroup {
        title: "Scheme".to_owned(),
        rows: super::scheme::scheme_rows(result.scheme()),
    });
    if let Some(table) = &result.table {
        groups.push(FactGroup {
            title: "Predistortion table".to_owned(),
            rows: super::predistort::table_rows(table),
        });
    }
    groups.push(FactGroup {
        title: "Sampling".to_owned(),
        rows: vec![
            own(
                "oversampling",
                format!("{}x, {}", rate.factor, quantity(rate.rate_hz, "Hz", 6)),
            ),
            own("asked for by", rate.reason.text().to_owned()),
            own(
                "check by doubling",
                format!(
                    "from {}x to {}x margins moved by {:.3} dB at most (those past 30 dB not counted)",
                    rate.convergence.against_factor, rate.factor, rate.convergence.moved_db
                ),
            ),
            own("instants measured", rate.samples.to_string()),
            own(
                "mean spectrum",
                format!(
                    "{} segments, noise bandwidth {}",
                    result.output_spectrum.segments,
                    quantity(result.output_spectrum.enbw_hz, "Hz", 4)
                ),
            ),
            own(
                "taken off before the comparison",
                format!(
                    "delay {}, gain {} at {:.2} deg",
                    quantity(result.metrics.delay_s, "s", 4),
                    quantity(result.metrics.gain_v, "V", 4),
                    result.metrics.gain_deg
                ),
            ),
        ],
    });
    groups
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
    for row in check_rows(result) {
        let margin = row
            .margin_db
            .map_or("-".to_owned(), |margin| format!("{margin:+.2} dB"));
        let word = row.outcome.word().to_owned();
        checks.row([word, margin, row.found, row.allowed, row.name]);
    }
    let mut numbers = Table::new([("", Align::Left), ("", Align::Right), ("", Align::Left)]);
    for row in key_rows(result) {
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
