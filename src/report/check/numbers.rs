//! Checks, numbers and mask segments in rows.

use super::outcome;
use crate::report::page::{CheckRow, DataTable, KeyFigure};
use crate::report::table::Align;
use crate::report::text::quantity;
use crate::study::CheckResult;
use crate::units;
use crate::verdict::Check;

pub(super) fn check_rows(result: &CheckResult) -> Vec<CheckRow> {
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
pub(super) fn key_rows(result: &CheckResult) -> Vec<[String; 3]> {
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

pub(super) fn key_figures(result: &CheckResult) -> Vec<KeyFigure> {
    key_rows(result)
        .into_iter()
        .map(|[name, value, note]| KeyFigure { name, value, note })
        .collect()
}

pub(super) fn tables(result: &CheckResult) -> Vec<DataTable> {
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
