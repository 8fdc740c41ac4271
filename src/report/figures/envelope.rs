//! The envelope against the supply track over a short stretch of time.

use super::{Quantity, pairs, span};
use crate::report::picture::{AxisSpec, Chart, Curve, Figure, Panel};

/// Envelopes and tracks around one instant, such as a deep notch.
#[derive(Debug, Clone)]
pub struct EnvelopeFigure {
    /// What is shown.
    pub title: String,
    /// The axis upwards: `supply` in `V`, or the output amplitude.
    pub quantity: Quantity,
    /// Curves on the same scale: what was wanted, what the supply did, ...
    pub curves: Vec<EnvelopeCurve>,
}

/// One course over time.
#[derive(Debug, Clone, Default)]
pub struct EnvelopeCurve {
    /// As the legend says it.
    pub name: String,
    /// Instants, seconds, rising.
    pub time_s: Vec<f64>,
    /// Values at `time_s`.
    pub value: Vec<f64>,
}

impl EnvelopeFigure {
    /// Draws it.
    pub fn figure(&self) -> Figure {
        let mut panel = Panel::new(self.quantity.axis(), 220.0);
        for (index, curve) in self.curves.iter().enumerate() {
            let points = pairs(&curve.time_s, &curve.value);
            panel
                .curves
                .push(Curve::numbered(index, &curve.name, points));
        }
        let names: Vec<&str> = self
            .curves
            .iter()
            .map(|curve| curve.name.as_str())
            .collect();
        let times = self
            .curves
            .iter()
            .flat_map(|curve| curve.time_s.iter().copied());
        let description = format!(
            "{}: {} over time, {}.",
            self.title,
            names.join(", "),
            span(times, "s")
        );
        Figure::new(
            description,
            Chart {
                title: self.title.clone(),
                across: AxisSpec::engineering("time", "s"),
                shades: Vec::new(),
                panels: vec![panel],
            },
        )
    }
}
