//! Error vectors, harmonics, and the limits that a study states itself.

use super::adjacent::{Pair, pair};
use super::judge::{Gathered, Measured, Ruling};
use super::reading::level_dbm;
use crate::limits::{
    Applies, ErrorRow, LimitSet, Limits, Modulation, Spurious, SpuriousRow, Statistic,
    same_modulation,
};
use crate::units::{dbm_from_watt, show};

/// Which of several rows for one thing holds, and why, where it had to be chosen.
pub(super) fn pick<'r, R>(
    rows: &[&'r R],
    applies: impl Fn(&R) -> &Applies,
    limit: impl Fn(&R) -> f64,
    class: Option<&str>,
) -> Option<(&'r R, &'static str)> {
    let first = *rows.first()?;
    let by_class = rows.iter().any(|row| !applies(row).classes.is_empty());
    let differ = rows.iter().any(|row| limit(row) != limit(first));
    if class.is_some() || !by_class || !differ {
        return Some((first, ""));
    }
    let strictest = rows
        .iter()
        .copied()
        .min_by(|a, b| limit(a).total_cmp(&limit(b)))?;
    Some((
        strictest,
        "; no class is stated in [limits], the strictest row was taken",
    ))
}

/// Margin in words.
pub(super) fn room(margin_db: f64) -> String {
    if margin_db >= 0.0 {
        format!("{margin_db:.2} dB to spare")
    } else {
        format!("{:.2} dB too much", -margin_db)
    }
}

pub(super) fn modulation(
    set: &LimitSet,
    modulation: &Modulation,
    measured: &Measured<'_>,
    limits: &Limits,
    gathered: &mut Gathered,
) {
    let class = limits.class_for(set);
    let wanted = limits.modulation.as_deref().or(measured.modulation);
    let rows: Vec<&ErrorRow> = modulation
        .rows
        .iter()
        .filter(|row| {
            row.applies.to_class(class)
                && wanted.is_none_or(|wanted| same_modulation(&row.modulation, wanted))
                && (limits.coding.is_none() || row.coding.is_none() || row.coding == limits.coding)
        })
        .collect();
    if rows.is_empty() {
        gathered.undecided(
            Some(set),
            set.name.clone(),
            format!(
                "the set has no row for {}: state modulation in [limits]",
                wanted.unwrap_or("this class")
            ),
        );
    }
    for statistic in [
        Statistic::Rms,
        Statistic::Peak,
        Statistic::P95,
        Statistic::P99,
    ] {
        let group: Vec<&ErrorRow> = rows
            .iter()
            .copied()
            .filter(|row| row.statistic == statistic)
            .collect();
        let Some(row) = group
            .iter()
            .copied()
            .min_by(|a, b| a.limit_percent.total_cmp(&b.limit_percent))
        else {
            continue;
        };
        let mut why = String::new();
        if group
            .iter()
            .any(|other| other.limit_percent != row.limit_percent)
        {
            let coding = row
                .coding
                .as_ref()
                .map(|c| format!(" {c}"))
                .unwrap_or_default();
            let class = row
                .applies
                .classes
                .first()
                .map(|c| format!(" {c}"))
                .unwrap_or_default();
            why = format!(
                "; several rows fit, the strictest was taken ({}{coding}{class}): modulation, coding or class in [limits] tell them apart",
                row.modulation
            );
        }
        error_vector(
            Some(set),
            format!("{}, {}", set.name, statistic.word()),
            statistic,
            row.limit_percent,
            &why,
            measured,
            gathered,
        );
    }
}

fn error_vector(
    set: Option<&LimitSet>,
    name: String,
    statistic: Statistic,
    limit_percent: f64,
    why: &str,
    measured: &Measured<'_>,
    gathered: &mut Gathered,
) {
    let value = match statistic {
        Statistic::Rms => measured.evm_percent,
        Statistic::Peak => measured.evm_peak_percent,
        Statistic::P95 => measured.evm_p95_percent,
        Statistic::P99 => measured.evm_p99_percent,
    };
    let what = match statistic {
        Statistic::Rms => "RMS EVM",
        Statistic::Peak => "peak EVM",
        Statistic::P95 => "EVM of 95 % of the symbols",
        Statistic::P99 => "EVM of 99 % of the symbols",
    };
    match value.filter(|value| value.is_finite() && *value >= 0.0) {
        Some(value) => {
            // A perfect signal would have an endless margin; 1e-9 % is far below any rounding of it.
            let margin_db = 20.0 * (limit_percent / value.max(1e-9)).log10();
            let reason = format!(
                "{what} is {value:.3} %, limit {limit_percent:.2} %: {}{why}",
                room(margin_db)
            );
            let ruling = Ruling {
                margin_db,
                found: format!("{value:.3} %"),
                allowed: format!("{limit_percent:.2} %"),
                reason,
            };
            gathered.decided(set, name, ruling);
        }
        None => gathered.undecided(set, name, format!(
                "the {what} was not measured (it needs the reference signal, for symbols also the signal's format); limit {limit_percent:.2} %{why}"
            ),
        ),
    }
}

pub(super) fn spurious(
    set: &LimitSet,
    spurious: &Spurious,
    measured: &Measured<'_>,
    limits: &Limits,
    gathered: &mut Gathered,
) {
    let class = limits.class_for(set);
    let mean_dbm = dbm_from_watt(measured.mean_w);
    let limit_db = |row: &SpuriousRow| {
        let cap_db = row
            .cap_w
            .map_or(f64::INFINITY, |cap_w| dbm_from_watt(cap_w) - mean_dbm);
        let floor_db = row.floor_w.map_or(f64::NEG_INFINITY, |floor_w| {
            dbm_from_watt(floor_w) - mean_dbm
        });
        row.limit_db.min(cap_db).max(floor_db)
    };
    let mut rows: Vec<&SpuriousRow> = spurious
        .rows
        .iter()
        .filter(|row| row.applies.to_class(class) && row.applies.at_power(measured.mean_w))
        .collect();
    // Of two rows that share the power, the first holds.
    let mut kept: Vec<&SpuriousRow> = Vec::new();
    rows.retain(|row| {
        let doubled = kept
            .iter()
            .any(|other| other.applies.classes == row.applies.classes);
        kept.push(*row);
        !doubled
    });
    let Some((row, why)) = pick(&rows, |row| &row.applies, limit_db, class) else {
        gathered.undecided(
            Some(set),
            set.name.clone(),
            format!(
                "no row is for {} of output power",
                show(measured.mean_w, "W", 4)
            ),
        );
        return;
    };
    let limit = limit_db(row);
    let worst = measured.harmonics_dbc.and_then(|harmonics| {
        harmonics
            .iter()
            .enumerate()
            .max_by(|a, b| a.1.total_cmp(b.1))
    });
    let name = format!("{}, harmonics", set.name);
    match worst {
        Some((index, level_db)) if !level_db.is_nan() => {
            let level_db = level_db.max(level_dbm(0.0) - mean_dbm);
            let margin_db = limit - level_db;
            let reason = format!(
                "harmonic {} is {level_db:.2} dB against the fundamental of {mean_dbm:.2} dBm, limit {limit:.2} dB: {}{why}; other spurious emissions were not looked for",
                index + 2,
                room(margin_db)
            );
            let ruling = Ruling {
                margin_db,
                found: format!("{level_db:.2} dB"),
                allowed: format!("{limit:.2} dB"),
                reason,
            };
            gathered.decided(Some(set), name, ruling);
        }
        _ => gathered.undecided(
            Some(set),
            name,
            format!("no harmonics are known for this signal; limit {limit:.2} dB{why}"),
        ),
    }
}

/// What the switch had to stand against the user's rating.
fn rated(rating: f64, found: Option<f64>, unit: &str, name: &str, gathered: &mut Gathered) {
    let allowed = show(rating, unit, 4);
    let Some(found) = found.filter(|found| found.is_finite() && *found > 0.0) else {
        let reason = format!("the {name} is not known without a stage; rated {allowed}");
        return gathered.undecided(None, name.to_owned(), reason);
    };
    let margin_db = 20.0 * (rating / found).log10();
    let ruling = Ruling {
        margin_db,
        found: show(found, unit, 4),
        allowed: allowed.clone(),
        reason: format!(
            "the {name} reaches {} at the highest control that this signal asks for, rated {allowed}: {}",
            show(found, unit, 4),
            room(margin_db)
        ),
    };
    gathered.decided(None, name.to_owned(), ruling);
}

/// The limits that the study states itself.
pub(super) fn stated(measured: &Measured<'_>, limits: &Limits, gathered: &mut Gathered) {
    for row in &limits.acpr {
        pair(
            None,
            format!("acpr at {}", show(row.offset_hz, "Hz", 6)),
            Pair {
                offset_hz: row.offset_hz,
                filter: row.filter,
                main: row.main,
                limit_db: row.limit_db,
                floor_dbm: None,
                ignore_below_dbm: None,
                why: "",
            },
            measured,
            gathered,
        );
    }
    let stress = measured.stress;
    for (rating, found, unit, name) in [
        (
            limits.peak_voltage_v,
            stress.map(|s| s.peak_v),
            "V",
            "peak drain voltage",
        ),
        (
            limits.peak_current_a,
            stress.map(|s| s.peak_a),
            "A",
            "peak switch current",
        ),
    ] {
        if let Some(rating) = rating {
            rated(rating, found, unit, name, gathered);
        }
    }
    for (limit, statistic, name) in [
        (limits.evm_percent, Statistic::Rms, "evm"),
        (limits.evm_peak_percent, Statistic::Peak, "evm peak"),
    ] {
        if let Some(limit_percent) = limit {
            error_vector(
                None,
                name.to_owned(),
                statistic,
                limit_percent,
                "",
                measured,
                gathered,
            );
        }
    }
}
