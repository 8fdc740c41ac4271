//! Checks, numbers and mask segments in rows.

use crate::limits::Obtained;
use crate::metrics::MemoryCandidate;
use crate::report::check::outcome;
use crate::report::page::{CheckRow, DataTable};
use crate::report::table::Align;
use crate::report::text::{quantity, signed};
use crate::study::MeasureResult;
use crate::verdict::Check;

pub(super) fn margin(check: &Check) -> f64 {
    check.margin_db.unwrap_or(f64::NEG_INFINITY)
}

pub(super) fn reason(check: &Check) -> String {
    let doubt = match check.obtained {
        Some(Obtained::Memory) => " Limit recalled from memory: check it against the document.",
        Some(Obtained::SecondHand) => " Limit read second-hand: check it against the document.",
        _ => "",
    };
    format!("{}{doubt}", check.reason)
}

/// True where limits were named.
pub(super) fn judged(result: &MeasureResult) -> bool {
    !result.request.limits.is_empty()
}

pub(super) fn check_rows(result: &MeasureResult) -> Vec<CheckRow> {
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

/// Name, value and remark of the numbers that matter most.
pub(super) fn key_rows(result: &MeasureResult) -> Vec<[String; 3]> {
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
    if let Some(memory) = &result.memory {
        rows.push(row(
            "taken by memory",
            format!("{:.2} dB", memory.memory_gain_db()),
            format!(
                "polynomial without memory leaves {:.2} dB, with it {:.2} dB",
                memory.memoryless.held_out_nmse_db, memory.memory.held_out_nmse_db
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

/// What each model leaves: its name, NMSE held out, terms, condition number, largest coefficient.
pub(super) fn memory_rows(result: &MeasureResult) -> Vec<Vec<String>> {
    let Some(fit) = &result.memory else {
        return Vec::new();
    };
    let lags = |candidate: &MemoryCandidate| {
        let apart = fit.lag_samples;
        let far = |lags: usize| lags * apart;
        match (candidate.size.ahead, candidate.size.behind) {
            (0, 0) => String::new(),
            (ahead, behind) => format!(", lags -{} to {} samples", far(ahead), far(behind)),
        }
    };
    [
        ("one gain".to_owned(), &fit.linear),
        (
            format!(
                "polynomial without memory, powers to {}",
                fit.memoryless.size.power
            ),
            &fit.memoryless,
        ),
        (format!("filter{}", lags(&fit.filter)), &fit.filter),
        (
            format!(
                "best of all: powers to {}{}",
                fit.memory.size.power,
                lags(&fit.memory)
            ),
            &fit.memory,
        ),
    ]
    .into_iter()
    .map(|(name, candidate)| {
        vec![
            name,
            format!("{:.2} dB", candidate.held_out_nmse_db),
            candidate.terms.to_string(),
            format!("{:.1e}", candidate.condition),
            format!("{:.3}", candidate.largest_coefficient),
        ]
    })
    .collect()
}

pub(super) fn tables(result: &MeasureResult) -> Vec<DataTable> {
    let right = |name: &str| (name.to_owned(), Align::Right);
    let mut tables = Vec::new();
    let memory = memory_rows(result);
    if !memory.is_empty() {
        tables.push(DataTable {
            title: "Models of the pair, fitted on one half and held against the other".to_owned(),
            columns: vec![
                ("model".to_owned(), Align::Left),
                right("leaves of the power"),
                right("terms"),
                right("condition number"),
                right("largest coefficient"),
            ],
            rows: memory,
        });
    }
    if result.metrics.mask.is_empty() {
        return tables;
    }
    tables.push(DataTable {
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
    });
    tables
}
