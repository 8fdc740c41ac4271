//! Spectrum over offset, against masks, with the worst point marked.

use super::mask::MaskLine;
use crate::report::palette::Role;
use crate::report::picture::{AxisSpec, Chart, Curve, Dash, Figure, Mark, Panel};
use crate::report::text::{quantity, signed};

/// Averaged spectra and the masks they are held against.
#[derive(Debug, Clone, Default)]
pub struct SpectrumFigure {
    /// What is shown: `Output spectrum`; the resolution is added.
    pub title: String,
    /// Unit of the levels: `dBm`, `dBr`.
    pub level_unit: String,
    /// Bandwidth in which the levels are stated, hertz.
    pub resolution_hz: f64,
    /// Curves, the output first.
    pub curves: Vec<SpectrumCurve>,
    /// Mask lines, in the same unit and resolution.
    pub masks: Vec<MaskLine>,
    /// The smallest margins, the worst first.
    pub worst: Vec<WorstPoint>,
    /// Largest offset shown, hertz; all where `None`.
    pub span_hz: Option<f64>,
}

/// One spectrum.
#[derive(Debug, Clone, Default)]
pub struct SpectrumCurve {
    /// As the legend says it: `output`, `wanted`.
    pub name: String,
    /// (offset from the carrier in hertz, level), offsets rising.
    pub points: Vec<(f64, f64)>,
}

/// A point where the margin is smallest.
#[derive(Debug, Clone, Copy, Default)]
pub struct WorstPoint {
    /// Offset from the carrier, hertz.
    pub offset_hz: f64,
    /// Level of the curve there, in the figure's unit and resolution.
    pub level: f64,
    /// Margin in dB, positive is within the limit.
    pub margin_db: f64,
}

impl WorstPoint {
    /// `margin -3.2 dB at +12.5 kHz`.
    pub fn label(&self) -> String {
        format!(
            "margin {:+.1} dB at {}",
            self.margin_db,
            signed(self.offset_hz, "Hz", 4)
        )
    }
}

/// A label that may break before `at` only.
fn no_break(label: &str) -> String {
    label.replace(' ', "\u{a0}").replace("\u{a0}at", " at")
}

impl SpectrumFigure {
    /// Draws it. Thousands of bins are reduced to the extremes per pixel.
    pub fn figure(&self) -> Figure {
        let mut panel = Panel::new(AxisSpec::plain(self.level_axis(), ""), 320.0);
        panel.up.at_least = self.lowest_shown();
        for mask in &self.masks {
            panel
                .curves
                .push(Curve::limit(&mask.name, mask.points.clone()));
        }
        // The output is drawn last, over the others.
        for (index, curve) in self.curves.iter().enumerate().rev() {
            let mut drawn = Curve::numbered(index, &curve.name, curve.points.clone());
            drawn.width = if index == 0 { 1.2 } else { 1.0 };
            if index > 0 {
                // Dashes along a noisy line cannot be seen; thickness and lightness tell them apart.
                drawn.dash = Dash::Solid;
            }
            panel.curves.push(drawn);
        }
        for worst in &self.worst {
            panel.marks.push(Mark {
                at: (worst.offset_hz, worst.level),
                text: no_break(&worst.label()),
                role: if worst.margin_db >= 0.0 {
                    Role::Within
                } else {
                    Role::Limit
                },
            });
        }
        let mut across = AxisSpec::engineering("offset from the carrier", "Hz");
        across.range = self
            .span_hz
            .filter(|span| span.is_finite() && *span > 0.0)
            .map(|span| (-span, span));
        let title = format!("{}, {}", self.title, self.level_axis());
        let names: Vec<&str> = self
            .curves
            .iter()
            .map(|curve| curve.name.as_str())
            .collect();
        let worst = match self.worst.first() {
            Some(worst) => format!(" Worst point: {}.", worst.label()),
            None => String::new(),
        };
        let description = format!("{title}; curves: {}.{worst}", names.join(", "));
        Figure::new(
            description,
            Chart {
                title,
                across,
                shades: Vec::new(),
                panels: vec![panel],
            },
        )
    }

    fn level_axis(&self) -> String {
        if self.resolution_hz.is_finite() && self.resolution_hz > 0.0 {
            format!(
                "{} in {}",
                self.level_unit,
                quantity(self.resolution_hz, "Hz", 4)
            )
        } else {
            self.level_unit.clone()
        }
    }

    /// Keeps the vertical axis on what matters: 20 dB below the masks' lowest line or 90 dB below the
    /// highest level, whichever is lower.
    fn lowest_shown(&self) -> Option<f64> {
        let finite = |points: &[(f64, f64)]| -> Vec<f64> {
            points
                .iter()
                .map(|point| point.1)
                .filter(|level| level.is_finite())
                .collect()
        };
        let highest = self
            .curves
            .iter()
            .flat_map(|curve| finite(&curve.points))
            .reduce(f64::max)?;
        let lowest_mask = self
            .masks
            .iter()
            .flat_map(|mask| finite(&mask.points))
            .reduce(f64::min)
            .unwrap_or(f64::INFINITY);
        Some((highest - 90.0).min(lowest_mask - 20.0))
    }
}
