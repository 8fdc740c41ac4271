//! The figures of the trade, each from a small struct of plain data.
//!
//! Values that are not finite are left out; a figure without any value shows empty axes.

mod bend;
mod ccdf;
mod cloud;
mod constellation;
mod envelope;
mod lookup;
mod map;
mod margin;
mod mask;
mod mismatch;
mod shapes;
mod spectrum;
mod waveform;

pub use bend::{BendCurve, BendFigure};
pub use ccdf::{CcdfCurve, CcdfFigure};
pub use cloud::CloudFigure;
pub use constellation::ConstellationFigure;
pub use envelope::{EnvelopeCurve, EnvelopeFigure};
pub use lookup::{LookupCurve, LookupFigure};
pub use map::MapFigure;
pub use margin::{MarginCurve, MarginFigure};
pub use mask::{MaskFigure, MaskLine};
pub use mismatch::MismatchFigure;
pub use shapes::{ShapeCurve, ShapesFigure};
pub use spectrum::{SpectrumCurve, SpectrumFigure, WorstPoint};
pub use waveform::{OtherCurves, WaveformFigure};

use crate::report::text::quantity;

/// The quantity a control axis shows: `supply`, in `V`.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Quantity {
    /// As a person calls it: `supply`, `pulse width`, `outphasing angle`.
    pub name: String,
    /// Unit symbol without a prefix; empty for a pure number.
    pub unit: String,
}

impl Quantity {
    /// A quantity from its name and unit.
    pub fn new(name: impl Into<String>, unit: impl Into<String>) -> Self {
        Self {
            name: name.into(),
            unit: unit.into(),
        }
    }

    /// Its axis: prefixes for SI units, none for pure numbers, degrees and percent.
    pub(crate) fn axis(&self) -> crate::report::picture::AxisSpec {
        use crate::report::picture::AxisSpec;
        match self.unit.as_str() {
            "V" | "A" | "W" | "Hz" | "s" | "F" | "H" => {
                AxisSpec::engineering(self.name.clone(), &self.unit)
            }
            unit => AxisSpec::plain(self.name.clone(), unit),
        }
    }
}

/// Pairs of two equally long lists; what one has too many is left out.
pub(crate) fn pairs(across: &[f64], up: &[f64]) -> Vec<(f64, f64)> {
    across.iter().copied().zip(up.iter().copied()).collect()
}

/// The point with the largest finite second value.
pub(crate) fn highest(points: &[(f64, f64)]) -> Option<(f64, f64)> {
    points
        .iter()
        .copied()
        .filter(|point| point.0.is_finite() && point.1.is_finite())
        .max_by(|a, b| a.1.total_cmp(&b.1))
}

/// The finite span of `values` in words: `0.1 V to 6 V`.
pub(crate) fn span(values: impl Iterator<Item = f64>, unit: &str) -> String {
    let (low, high) = values
        .filter(|value| value.is_finite())
        .fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), value| {
            (low.min(value), high.max(value))
        });
    if low > high {
        return "no values".to_owned();
    }
    format!("{} to {}", quantity(low, unit, 4), quantity(high, unit, 4))
}
