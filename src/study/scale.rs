//! What a capture's numbers are in watts, and verdicts where nobody said so.

use std::collections::BTreeSet;

use serde::Serialize;

use crate::limits::Limits;
use crate::metrics::Spectrum;
use crate::units::watt_from_dbm;
use crate::verdict::{Judgement, Measured, Outcome, Unit, Verdict, judge};

/// What one of the file's units is. Full scale of a signal file is 1.0.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize)]
#[serde(rename_all = "snake_case", tag = "kind")]
pub enum Scale {
    /// Nobody said: only ratios are known.
    #[default]
    Unknown,
    /// A carrier of constant magnitude 1.0 has this power, W.
    FullScale {
        /// W
        full_scale_w: f64,
    },
    /// Magnitudes are peak volts over this load, ohm.
    Volts {
        /// ohm
        load_ohm: f64,
    },
}

impl Scale {
    /// Power of a constant magnitude of 1.0, W.
    pub fn watts_a_unit(self) -> Option<f64> {
        match self {
            Self::Unknown => None,
            Self::FullScale { full_scale_w } => Some(full_scale_w),
            Self::Volts { load_ohm } => Some(0.5 / load_ohm),
        }
    }
}

/// Mean powers at which a capture without a scale is judged, dBm: what comes out the same at all of them
/// does not depend on the power.
const TRIED_DBM: [f64; 6] = [0.0, -60.0, -20.0, 20.0, 40.0, 70.0];

/// Margins that agree to this do not depend on the power, dB.
const SAME_DB: f64 = 1e-6;

/// Judges ratios only: a check that comes out differently at different powers is undecided.
pub(super) fn judge_without_scale(measured: &Measured<'_>, limits: &Limits) -> Judgement {
    let judgements: Vec<Judgement> = TRIED_DBM
        .iter()
        .map(|&dbm| at_power(measured, limits, dbm))
        .collect();
    let mut judgement = judgements[0].clone();
    let others = &judgements[1..];
    let same = |a: Option<f64>, b: Option<f64>| match (a, b) {
        (Some(a), Some(b)) => (a - b).abs() < SAME_DB,
        (None, None) => true,
        _ => false,
    };
    let mut names = BTreeSet::new();
    for check in &mut judgement.verdict.checks {
        names.insert((check.set.clone(), check.name.clone()));
        let steady = others.iter().all(|other| {
            other.verdict.checks.iter().any(|twin| {
                twin.name == check.name
                    && twin.set == check.set
                    && twin.outcome == check.outcome
                    && same(twin.margin_db, check.margin_db)
            })
        });
        if !steady {
            check.outcome = Outcome::Undecided;
            check.margin_db = None;
            check.reason = "this limit depends on the absolute power, which a capture does not tell: state what full scale is with --full-scale (\"37 dBm\"), or --load-resistance where the file holds volts".to_owned();
        } else {
            // The power that it was judged at is made up; levels count from the capture's own mean.
            check.reason = check.reason.replace(" dBm", " dB (mean power = 0 dB)");
        }
    }
    // A check that only some powers know.
    for check in others.iter().flat_map(|other| &other.verdict.checks) {
        if names.insert((check.set.clone(), check.name.clone())) {
            let mut check = check.clone();
            check.outcome = Outcome::Undecided;
            check.margin_db = None;
            check.reason = "whether this limit applies depends on the absolute power: state --full-scale or --load-resistance".to_owned();
            judgement.verdict.checks.push(check);
        }
    }
    judgement.verdict = Verdict::of(judgement.verdict.checks);
    judgement.mask.retain(|margin| {
        others.iter().all(|other| {
            other.mask.iter().any(|twin| {
                twin.set == margin.set
                    && twin.from_hz == margin.from_hz
                    && twin.side == margin.side
                    && (twin.margin_db - margin.margin_db).abs() < SAME_DB
            })
        })
    });
    for margin in &mut judgement.mask {
        if margin.unit == Unit::Dbm {
            margin.unit = Unit::Decibel;
        }
    }
    // Lines of limits that do not move with the power have no place in a picture of ratios.
    let kept: Vec<String> = judgement.mask.iter().map(|m| m.set.clone()).collect();
    judgement.lines.retain(|line| kept.contains(&line.set));
    judgement
}

/// Judges the capture as if its mean power were `dbm`.
fn at_power(measured: &Measured<'_>, limits: &Limits, dbm: f64) -> Judgement {
    let factor = watt_from_dbm(dbm) / measured.mean_w;
    let scaled = |spectrum: &Spectrum| {
        let times = |values: &[f64]| values.iter().map(|value| value * factor).collect();
        Spectrum {
            mean_w_per_hz: times(&spectrum.mean_w_per_hz),
            peak_w_per_hz: spectrum.peak_w_per_hz.as_deref().map(times),
            ..spectrum.clone()
        }
    };
    let fine = scaled(measured.fine);
    let peak_hold: Vec<Spectrum> = measured.peak_hold.iter().map(scaled).collect();
    judge(
        &Measured {
            fine: &fine,
            peak_hold: &peak_hold,
            mean_w: measured.mean_w * factor,
            peak_w: measured.peak_w * factor,
            ..*measured
        },
        limits,
    )
}
