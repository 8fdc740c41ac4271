//! What the stage does over a control: amplitude, phase, efficiency, stress.

use super::{Quantity, highest, pairs, span};
use crate::report::palette::Role;
use crate::report::picture::{AxisSpec, Chart, Curve, Figure, Mark, Panel};
use crate::report::text::quantity;

/// A map of the stage; empty lists leave their panel out.
#[derive(Debug, Clone)]
pub struct MapFigure {
    /// What is shown.
    pub title: String,
    /// The axis across.
    pub control: Quantity,
    /// Control values, rising.
    pub control_values: Vec<f64>,
    /// Output amplitude (peak), volts.
    pub amplitude_v: Vec<f64>,
    /// Output phase, degrees.
    pub phase_deg: Vec<f64>,
    /// Efficiency, 0 to 1.
    pub efficiency: Vec<f64>,
    /// Peak switch voltage, volts.
    pub switch_peak_v: Vec<f64>,
}

impl MapFigure {
    /// Draws it: up to four panels over one control axis.
    pub fn figure(&self) -> Figure {
        let percent: Vec<f64> = self.efficiency.iter().map(|share| 100.0 * share).collect();
        let mut panels = Vec::new();
        let mut add = |index: usize, up: AxisSpec, values: &[f64]| {
            if values.is_empty() {
                return;
            }
            let mut panel = Panel::new(up, 110.0);
            let mut curve = Curve::numbered(0, "", pairs(&self.control_values, values));
            curve.role = Role::curve(index);
            panel.curves.push(curve);
            panels.push(panel);
        };
        add(
            0,
            AxisSpec::engineering("output amplitude", "V"),
            &self.amplitude_v,
        );
        add(1, AxisSpec::plain("output phase", "deg"), &self.phase_deg);
        add(3, AxisSpec::plain("efficiency", "%"), &percent);
        add(
            2,
            AxisSpec::engineering("peak switch voltage", "V"),
            &self.switch_peak_v,
        );
        let peak = highest(&pairs(&self.control_values, &self.switch_peak_v));
        if let (Some(at), Some(panel)) = (peak, panels.last_mut()) {
            panel.marks.push(Mark {
                at,
                text: format!("highest {}", quantity(at.1, "V", 3)),
                role: Role::Third,
            });
        }
        let description = format!(
            "{}: amplitude, phase, efficiency and peak switch voltage over the {}, {}.",
            self.title,
            self.control.name,
            span(self.control_values.iter().copied(), &self.control.unit)
        );
        Figure::new(
            description,
            Chart {
                title: self.title.clone(),
                across: self.control.axis(),
                shades: Vec::new(),
                panels,
            },
        )
    }
}
