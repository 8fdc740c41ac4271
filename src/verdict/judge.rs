//! Everything that was measured against everything that was asked for.

use serde::Serialize;

use super::adjacent::{adjacent as neighbours, beyond_mask};
use super::line::{MaskLine, lines_of};
use super::mask::MaskJudge;
use super::outcome::{Check, MaskMargin, Outcome, Verdict};
use super::reading::Bands;
use super::rows;
use super::wanted::conditions;
use crate::limits::{Conditions, Kind, LimitSet, Limits, Obtained};
use crate::metrics::{AdjacentChannel, Spectrum};

/// What was measured at the output.
#[derive(Debug, Clone, Copy)]
pub struct Measured<'a> {
    /// The averaged spectrum, W/Hz over the offset from the carrier.
    pub fine: &'a Spectrum,
    /// Peak-hold spectra, one for each of [`super::Wanted::peak_hold_resolutions_hz`].
    pub peak_hold: &'a [Spectrum],
    /// Mean output power, W: P of limits that depend on the power.
    pub mean_w: f64,
    /// Peak envelope power, W: the largest |x|^2 / (2 R).
    pub peak_w: f64,
    /// RMS error vector magnitude, percent.
    pub evm_percent: Option<f64>,
    /// Largest error vector magnitude, percent.
    pub evm_peak_percent: Option<f64>,
    /// Error vector magnitude that 95 % of the symbols do not exceed, percent.
    pub evm_p95_percent: Option<f64>,
    /// Error vector magnitude that 99 % of the symbols do not exceed, percent.
    pub evm_p99_percent: Option<f64>,
    /// The signal's modulation, where it is known and the limits do not state it.
    pub modulation: Option<&'a str>,
    /// Harmonics of the carrier against the fundamental, dB, the second first.
    pub harmonics_dbc: Option<&'a [f64]>,
    /// What the switch had to stand; none where no stage was solved.
    pub stress: Option<Stress>,
}

/// The most that the switch had to stand while the signal was on.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Stress {
    /// Drain voltage, V.
    pub peak_v: f64,
    /// Switch current, A.
    pub peak_a: f64,
}

/// A verdict with the numbers behind it.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Judgement {
    /// What it comes to.
    pub verdict: Verdict,
    /// The tightest point of every mask segment, on each side.
    pub mask: Vec<MaskMargin>,
    /// Every pair of neighbouring channels that was read.
    pub acpr: Vec<AdjacentChannel>,
    /// The limits of masks for pictures.
    pub lines: Vec<MaskLine>,
    /// What the reader of the verdict must know besides.
    pub warnings: Vec<String>,
}

/// Where checks are gathered.
#[derive(Debug, Default)]
pub(super) struct Gathered {
    pub checks: Vec<Check>,
    pub mask: Vec<MaskMargin>,
    pub acpr: Vec<AdjacentChannel>,
    pub lines: Vec<MaskLine>,
    pub warnings: Vec<String>,
}

/// A reading held against its limit.
#[derive(Debug)]
pub(super) struct Ruling {
    /// Distance to the limit, dB; positive is within.
    pub margin_db: f64,
    /// The reading with its unit.
    pub found: String,
    /// The limit with its unit.
    pub allowed: String,
    /// What was read where, and what is allowed there.
    pub reason: String,
}

impl Gathered {
    /// Adds a check of `set`, or of the study itself, that could not be made.
    pub(super) fn undecided(&mut self, set: Option<&LimitSet>, name: String, reason: String) {
        self.add(set, name, Outcome::Undecided, None, None, reason);
    }

    /// Adds a check of `set`, or of the study itself, with the reading that was held against its limit.
    pub(super) fn decided(&mut self, set: Option<&LimitSet>, name: String, ruling: Ruling) {
        let Ruling {
            margin_db,
            found,
            allowed,
            reason,
        } = ruling;
        let outcome = Outcome::of_margin(margin_db);
        self.add(
            set,
            name,
            outcome,
            Some(margin_db),
            Some((found, allowed)),
            reason,
        );
    }

    /// The reason says where a set's numbers were not read in its source.
    fn add(
        &mut self,
        set: Option<&LimitSet>,
        name: String,
        outcome: Outcome,
        margin_db: Option<f64>,
        reading: Option<(String, String)>,
        reason: String,
    ) {
        let provenance = set.map(|set| &set.provenance);
        let caution = provenance
            .filter(|provenance| provenance.obtained != Obtained::Read)
            .and_then(|provenance| provenance.caution());
        let (found, allowed) = reading.unzip();
        self.checks.push(Check {
            name,
            outcome,
            margin_db: margin_db.filter(|margin| margin.is_finite()),
            found,
            allowed,
            reason: match caution {
                Some(caution) => format!("{reason} ({caution})"),
                None => reason,
            },
            set: set.map(|set| set.name.clone()),
            obtained: provenance.map(|provenance| provenance.obtained),
        });
    }

    fn finish(self) -> Judgement {
        Judgement {
            verdict: Verdict::of(self.checks),
            mask: self.mask,
            acpr: self.acpr,
            lines: self.lines,
            warnings: self.warnings,
        }
    }
}

/// Holds `measured` against `limits`.
pub fn judge(measured: &Measured<'_>, limits: &Limits) -> Judgement {
    let mut gathered = Gathered::default();
    if let Some(reason) = unusable(measured)
        && !limits.is_empty()
    {
        gathered.undecided(None, "output".to_owned(), reason.to_owned());
        return gathered.finish();
    }
    let bands = Bands::new(measured.fine);
    let conditions = Conditions {
        power_w: Some(measured.mean_w),
        ..conditions(limits)
    };
    for set in &limits.sets {
        if let Some(caution) = set.provenance.caution() {
            gathered.warnings.push(format!("{}: {caution}", set.name));
        }
        match &set.kind {
            Kind::Mask(mask) => {
                let judge = MaskJudge {
                    set,
                    mask,
                    class: limits.class_for(set),
                    conditions: mask.with_own(&conditions),
                    carrier_w: limits.carrier_w,
                    measured,
                    bands: &bands,
                };
                judge.run(&mut gathered);
                let known = judge.references();
                gathered.lines.extend(lines_of(&judge, &known));
            }
            Kind::Adjacent(adjacent) => {
                neighbours(set, adjacent, measured, limits, &mut gathered);
                if let Some(mask) = beyond_mask(adjacent) {
                    let judge = MaskJudge {
                        set,
                        mask: &mask,
                        class: None,
                        conditions: mask.with_own(&conditions),
                        carrier_w: limits.carrier_w,
                        measured,
                        bands: &bands,
                    };
                    judge.run(&mut gathered);
                }
            }
            Kind::Modulation(modulation) => {
                rows::modulation(set, modulation, measured, limits, &mut gathered);
            }
            Kind::Spurious(spurious) => {
                rows::spurious(set, spurious, measured, limits, &mut gathered);
            }
            Kind::Signal(_) => gathered.warnings.push(format!(
                "{} describes a signal and limits nothing",
                set.name
            )),
        }
    }
    rows::stated(measured, limits, &mut gathered);
    gathered.finish()
}

/// Why nothing can be judged at all.
fn unusable(measured: &Measured<'_>) -> Option<&'static str> {
    let positive = |watt: f64| watt.is_finite() && watt > 0.0;
    let finite = |spectrum: &Spectrum| {
        spectrum.bin_hz > 0.0
            && spectrum.bin_hz.is_finite()
            && spectrum.bins() > 0
            && spectrum.mean_w_per_hz.iter().all(|w| w.is_finite())
            && spectrum
                .peak_w_per_hz
                .iter()
                .flatten()
                .all(|w| w.is_finite())
    };
    if !positive(measured.mean_w) || !positive(measured.peak_w) {
        Some("the output holds no power, or its power is no number: there is nothing to judge")
    } else if !finite(measured.fine) || !measured.peak_hold.iter().all(finite) {
        Some("a spectrum holds no bins or values that are no numbers: there is nothing to judge")
    } else {
        None
    }
}
