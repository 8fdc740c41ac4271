//! A predistortion table: control and correction of the phase over the wanted magnitude.

use super::pairs;
use crate::report::picture::{AxisSpec, Chart, Curve, Figure, Panel};

/// A table beside what it was made from.
#[derive(Debug, Clone, Default)]
pub struct LookupFigure {
    /// What is shown.
    pub title: String,
    /// Unit of the control without a prefix; empty for a part.
    pub control_unit: &'static str,
    /// Curves, the quantized table first.
    pub curves: Vec<LookupCurve>,
}

/// One curve.
#[derive(Debug, Clone, Default)]
pub struct LookupCurve {
    /// As the legend says it.
    pub name: String,
    /// Wanted magnitude, 0 to 1, rising.
    pub magnitude: Vec<f64>,
    /// Control, in the figure's unit: V for a supply.
    pub control_v: Vec<f64>,
    /// Correction of the phase, degrees.
    pub phase_deg: Vec<f64>,
}

impl LookupFigure {
    /// Draws it: control above phase over one axis.
    pub fn figure(&self) -> Figure {
        let panel = |up: AxisSpec, values: fn(&LookupCurve) -> &[f64]| {
            let mut panel = Panel::new(up, 170.0);
            for (index, curve) in self.curves.iter().enumerate() {
                let points = pairs(&curve.magnitude, values(curve));
                panel
                    .curves
                    .push(Curve::numbered(index, &curve.name, points));
            }
            panel
        };
        let control = match self.control_unit {
            "" => AxisSpec::plain("control, part", ""),
            unit => AxisSpec::engineering("control", unit),
        };
        let panels = vec![
            panel(control, |curve| &curve.control_v),
            panel(AxisSpec::plain("correction of the phase", "deg"), |curve| {
                &curve.phase_deg
            }),
        ];
        let description = format!(
            "{}: control and correction of the phase over the wanted magnitude, {} entries.",
            self.title,
            self.curves.first().map_or(0, |curve| curve.magnitude.len())
        );
        Figure::new(
            description,
            Chart {
                title: self.title.clone(),
                across: AxisSpec::plain("wanted magnitude, part of the range", ""),
                shades: Vec::new(),
                panels,
            },
        )
    }
}
