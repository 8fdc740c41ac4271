//! The drain's waveform at several values of a control, in volts and against the supply.

use super::pairs;
use crate::report::picture::{AxisSpec, Chart, Curve, Figure, Panel};

/// One value of the control.
#[derive(Debug, Clone, Default)]
pub struct ShapeCurve {
    /// As the legend says it: `full, 6 V`.
    pub name: String,
    /// Instants, s.
    pub time_s: Vec<f64>,
    /// Drain voltage, V.
    pub drain_v: Vec<f64>,
    /// Supply, V.
    pub supply_v: f64,
}

/// Drain waveforms over one period.
#[derive(Debug, Clone, Default)]
pub struct ShapesFigure {
    /// What is shown.
    pub title: String,
    /// From the strongest to the weakest.
    pub curves: Vec<ShapeCurve>,
}

impl ShapesFigure {
    /// Draws it: volts above, and below each over its own supply, where a straight stage has one curve at every
    /// supply.
    pub fn figure(&self) -> Figure {
        let panel = |up: AxisSpec, unit_v: fn(&ShapeCurve) -> f64| {
            let mut panel = Panel::new(up, 170.0);
            for (index, curve) in self.curves.iter().enumerate() {
                let unit_v = unit_v(curve);
                let values: Vec<f64> = curve.drain_v.iter().map(|volt| volt / unit_v).collect();
                let points = pairs(&curve.time_s, &values);
                panel
                    .curves
                    .push(Curve::numbered(index, &curve.name, points));
            }
            panel
        };
        let names: Vec<&str> = self
            .curves
            .iter()
            .map(|curve| curve.name.as_str())
            .collect();
        Figure::new(
            format!("{}: {}.", self.title, names.join("; ")),
            Chart {
                title: self.title.clone(),
                across: AxisSpec::engineering("time", "s"),
                shades: Vec::new(),
                panels: vec![
                    panel(AxisSpec::engineering("drain voltage", "V"), |_| 1.0),
                    panel(
                        AxisSpec::plain("drain voltage over the supply", ""),
                        |curve| curve.supply_v,
                    ),
                ],
            },
        )
    }
}
