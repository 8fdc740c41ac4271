//! The stage's static output over the control that it was given, from all pairs that are no outliers.

use num_complex::Complex64;

use super::scout::{CELLS, FEWEST, ScoutLines, cell, turned_back};
use crate::drive::{Lookup, Shaping};
use crate::units::db;

/// Pairs farther than this from their cell's line are left out, in spreads by axis: of Gaussian noise `exp(-8)`, one
/// in 3000.
const FARTHEST: f64 = 4.0;

/// Sums of one cell.
#[derive(Debug, Clone, Copy, Default)]
struct Sum {
    count: u64,
    magnitude: f64,
    square: f64,
    value: Complex64,
    product: Complex64,
    energy: f64,
    control: f64,
    stage: Complex64,
}

/// What the stage gave at one control.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct StagePoint {
    /// Mean wanted magnitude, a part of the control's range.
    pub magnitude: f64,
    /// Mean control that the table in force asked for, a part of its range.
    pub control: f64,
    /// Output over the gain, the phase that the table added taken off.
    #[serde(skip)]
    pub output: Complex64,
    /// RMS distance of the pairs from the cell's line, over the gain.
    pub spread: f64,
    /// Pairs.
    pub samples: u64,
}

/// What a captured pair says about the stage.
#[derive(Debug, Clone, PartialEq)]
pub struct StaticFit {
    /// One for each cell that holds enough, magnitudes rising.
    pub points: Vec<StagePoint>,
    /// What one complex gain leaves of the output's power, dB.
    pub linear_rest_db: f64,
    /// What the static output over the wanted magnitude leaves of it, dB: memory and noise.
    pub static_rest_db: f64,
    /// Part of the pairs that were left out as outliers.
    pub left_out: f64,
    /// Pairs that counted.
    pub samples: u64,
    /// The wanted signal's full scale, a part of the control's range.
    pub level: f64,
}

/// Takes all pairs, behind the lines of a [`super::Scout`].
#[derive(Debug, Clone)]
pub struct Cloud<'a> {
    scouted: &'a ScoutLines,
    in_force: InForce<'a>,
    level: f64,
    cells: Vec<Sum>,
    xx: f64,
    yy: f64,
    xy: Complex64,
    taken: u64,
    outliers: u64,
}

/// What the front end does with a wanted magnitude while the capture is taken.
#[derive(Debug, Clone, Copy)]
pub enum InForce<'a> {
    /// No table: the magnitude is the control, above the scheme's floor.
    Plain(Shaping),
    /// A table.
    Table(&'a Lookup),
}

impl InForce<'_> {
    /// Control, a part of its range, and phase added, rad.
    pub fn at(self, magnitude: f64) -> (f64, f64) {
        match self {
            Self::Plain(shaping) => (shaping.apply(magnitude).min(1.0), 0.0),
            Self::Table(lookup) => {
                let word = lookup.word(magnitude);
                (lookup.control(word), lookup.phase_rad(word))
            }
        }
    }
}

impl<'a> Cloud<'a> {
    /// For a transmitter behind `in_force`; `level` is the wanted signal's full scale as a part of the control's
    /// range.
    pub fn new(scouted: &'a ScoutLines, in_force: InForce<'a>, level: f64) -> Self {
        Self {
            scouted,
            in_force,
            level,
            cells: vec![Sum::default(); CELLS],
            xx: 0.0,
            yy: 0.0,
            xy: Complex64::ZERO,
            taken: 0,
            outliers: 0,
        }
    }

    /// Takes the next pairs.
    pub fn push(&mut self, wanted: &[Complex64], output: &[Complex64]) {
        for (&x, &y) in wanted.iter().zip(output) {
            let y = y * self.scouted.unscale;
            let magnitude = x.norm();
            let index = cell(magnitude, self.scouted.peak);
            let Some(line) = self.scouted.lines[index] else {
                continue;
            };
            let value = turned_back(x, y, magnitude);
            // Without noise the spread is nothing but rounding.
            let farthest = FARTHEST * line.spread + 1e-9 * (line.value.norm() + self.scouted.peak);
            if (value - line.at(magnitude)).norm() > farthest {
                self.outliers += 1;
                continue;
            }
            self.taken += 1;
            self.xx += magnitude * magnitude;
            self.yy += y.norm_sqr();
            self.xy += x.conj() * y;
            let (control, phase_rad) = self.in_force.at(self.level * magnitude);
            let sum = &mut self.cells[index];
            sum.count += 1;
            sum.magnitude += magnitude;
            sum.square += magnitude * magnitude;
            sum.value += value;
            sum.product += value * magnitude;
            sum.energy += value.norm_sqr();
            sum.control += control;
            sum.stage += value * Complex64::cis(-phase_rad);
        }
    }

    /// The fit; `None` where nothing could be read.
    pub fn finish(self) -> Option<StaticFit> {
        if !(self.xx > 0.0 && self.yy > 0.0 && self.yy.is_finite()) {
            return None;
        }
        let mut rest = 0.0;
        let mut points = Vec::new();
        for sum in self.cells.iter().filter(|sum| sum.count > 2) {
            let left = rest_of(sum);
            rest += left * sum.count as f64;
            if sum.count < FEWEST as u64 {
                continue;
            }
            let count = sum.count as f64;
            points.push(StagePoint {
                magnitude: self.level * sum.magnitude / count,
                control: sum.control / count,
                output: sum.stage / count,
                spread: left.sqrt(),
                samples: sum.count,
            });
        }
        let linear_rest = (self.yy - self.xy.norm_sqr() / self.xx).max(0.0) / self.yy;
        Some(StaticFit {
            points,
            linear_rest_db: db(linear_rest.max(f64::MIN_POSITIVE)),
            static_rest_db: db((rest / self.yy).max(f64::MIN_POSITIVE)),
            left_out: self.outliers as f64 / (self.outliers + self.taken) as f64,
            samples: self.taken,
            level: self.level,
        })
    }
}

/// Energy a pair that the cell's own line leaves; two complex numbers were fitted.
fn rest_of(sum: &Sum) -> f64 {
    let count = sum.count as f64;
    let across = sum.square - sum.magnitude * sum.magnitude / count;
    let along = sum.product - sum.value * (sum.magnitude / count);
    let around = sum.energy - sum.value.norm_sqr() / count;
    let explained = if across > 1e-12 * sum.square {
        along.norm_sqr() / across
    } else {
        0.0
    };
    (around - explained).max(0.0) / (count - 2.0)
}
