//! AM-AM and AM-PM: how output amplitude and phase follow the control, with the signal on it.

use super::{Quantity, pairs};
use crate::report::palette::Role;
use crate::report::picture::{AxisSpec, Backdrop, Chart, Curve, Figure, Panel, Shade};

/// Amplitude and phase over the control, and how often the signal is where.
#[derive(Debug, Clone)]
pub struct BendFigure {
    /// What is shown.
    pub title: String,
    /// The axis across: `supply` in `V`.
    pub control: Quantity,
    /// Curves, the one the signal went through first.
    pub curves: Vec<BendCurve>,
    /// (control, relative frequency of the signal there); empty where unknown.
    pub density: Vec<(f64, f64)>,
    /// Control below which the signal never goes; `None` without a floor.
    pub floor: Option<f64>,
}

/// One map.
#[derive(Debug, Clone, Default)]
pub struct BendCurve {
    /// As the legend says it.
    pub name: String,
    /// Control values, rising.
    pub control: Vec<f64>,
    /// Output amplitude (peak) at `control`, volts.
    pub amplitude_v: Vec<f64>,
    /// Output phase at `control`, degrees.
    pub phase_deg: Vec<f64>,
}

impl BendFigure {
    /// Draws it: amplitude above phase, the signal's density behind both, the ground below the floor
    /// marked.
    pub fn figure(&self) -> Figure {
        let panel = |up: AxisSpec, values: fn(&BendCurve) -> &[f64]| {
            let mut panel = Panel::new(up, 190.0);
            for (index, curve) in self.curves.iter().enumerate() {
                let points = pairs(&curve.control, values(curve));
                panel
                    .curves
                    .push(Curve::numbered(index, &curve.name, points));
            }
            if !self.density.is_empty() {
                panel.backdrops.push(Backdrop {
                    name: "density of the signal".to_owned(),
                    points: self.density.clone(),
                });
            }
            panel
        };
        let panels = vec![
            panel(
                AxisSpec::engineering("AM-AM: output amplitude", "V"),
                |curve| &curve.amplitude_v,
            ),
            panel(AxisSpec::plain("AM-PM: output phase", "deg"), |curve| {
                &curve.phase_deg
            }),
        ];
        let lowest = self
            .curves
            .iter()
            .flat_map(|curve| curve.control.iter().copied())
            .filter(|control| control.is_finite())
            .reduce(f64::min);
        let shades = match (self.floor, lowest) {
            (Some(floor), Some(lowest)) if floor > lowest => vec![Shade {
                name: "below the floor".to_owned(),
                from: lowest,
                to: floor,
                role: Role::Limit,
                opacity: 0.12,
            }],
            _ => Vec::new(),
        };
        let across = self.control.axis();
        let description = format!(
            "{}: amplitude and phase of the output over the {}, {}.",
            self.title,
            self.control.name,
            super::span(
                self.curves
                    .iter()
                    .flat_map(|curve| curve.control.iter().copied()),
                &self.control.unit
            )
        );
        Figure::new(
            description,
            Chart {
                title: self.title.clone(),
                across,
                shades,
                panels,
            },
        )
    }
}
