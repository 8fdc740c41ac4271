//! A spectrum held against masks: what the pictures of a check and of a measurement share.

use super::figures::{MaskLine, SpectrumCurve, SpectrumFigure, WorstPoint};
use crate::metrics::AdjacentChannel;
use crate::units;
use crate::verdict::{self, MaskMargin, Unit};

/// The tightest mask margin.
pub(super) fn tightest(margins: &[MaskMargin]) -> Option<&MaskMargin> {
    margins
        .iter()
        .min_by(|a, b| a.margin_db.total_cmp(&b.margin_db))
}

/// The line in the narrowest measuring bandwidth: in a wide one a narrow carrier would be drawn far above
/// its power.
pub(super) fn narrowest(lines: &[verdict::MaskLine]) -> Option<&verdict::MaskLine> {
    lines
        .iter()
        .min_by(|a, b| a.bandwidth_hz.total_cmp(&b.bandwidth_hz))
}

/// What curves are drawn against.
pub(super) struct HeldSpectrum<'a> {
    /// Lines of the masks, dBm in their own bandwidths.
    pub lines: &'a [verdict::MaskLine],
    /// The margins found.
    pub margins: &'a [MaskMargin],
    /// Neighbouring channels, for the width of the picture.
    pub acpr: &'a [AdjacentChannel],
    /// Width that holds the power.
    pub occupied_hz: f64,
    /// Largest offset sampled.
    pub range_hz: f64,
    /// Bandwidth that levels are drawn in.
    pub resolution_hz: f64,
    /// Added to the lines where curves are not in dBm, dB.
    pub offset_db: f64,
}

impl HeldSpectrum<'_> {
    /// The picture of `curves`, levels in `unit`.
    pub fn figure(&self, title: &str, unit: &str, curves: Vec<SpectrumCurve>) -> SpectrumFigure {
        let masks = self
            .lines
            .iter()
            .map(|line| MaskLine {
                name: line.set.clone(),
                points: line
                    .points
                    .iter()
                    .map(|&(offset_hz, dbm)| (offset_hz, dbm + self.moved_db(line.bandwidth_hz)))
                    .collect(),
            })
            .collect();
        let worst = tightest(self.margins).map(|worst| WorstPoint {
            offset_hz: worst.worst_hz * worst.side.sign(),
            level: worst.level_db
                + match worst.unit {
                    Unit::Dbm => 0.0,
                    Unit::Decibel => worst.reference_dbm.unwrap_or(f64::NAN),
                }
                + self.moved_db(worst.bandwidth_hz),
            margin_db: worst.margin_db,
        });
        SpectrumFigure {
            title: title.to_owned(),
            level_unit: unit.to_owned(),
            resolution_hz: self.resolution_hz,
            curves,
            masks,
            worst: worst.into_iter().collect(),
            span_hz: Some(self.span_hz()),
        }
    }

    /// A line in another bandwidth is moved as noise would be.
    fn moved_db(&self, bandwidth_hz: f64) -> f64 {
        units::db(self.resolution_hz / bandwidth_hz) + self.offset_db
    }

    /// How far the picture reaches: past the last corner of every mask and three occupied bandwidths.
    fn span_hz(&self) -> f64 {
        let corner = self
            .lines
            .iter()
            .filter_map(|line| {
                // The end of an open line is the sampled edge: its second-last corner is the last real one.
                let count = line.points.len();
                line.points
                    .get(count.saturating_sub(2))
                    .map(|(offset_hz, _)| offset_hz.abs())
            })
            .fold(0.0_f64, f64::max);
        let rows = self
            .acpr
            .iter()
            .map(|pair| pair.offset_hz + pair.bandwidth_hz)
            .fold(0.0_f64, f64::max);
        let reach = (1.6 * corner).max(rows).max(3.0 * self.occupied_hz);
        reach.min(self.range_hz)
    }
}
