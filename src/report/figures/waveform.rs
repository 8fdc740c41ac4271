//! Drain voltage, switch current and load voltage over one period.

use super::{highest, pairs};
use crate::report::palette::Role;
use crate::report::picture::{AxisSpec, Chart, Curve, Figure, Mark, Panel, Shade};
use crate::report::text::quantity;

/// One period of the stage in periodic steady state.
#[derive(Debug, Clone, Default)]
pub struct WaveformFigure {
    /// What is shown: the stage's title.
    pub title: String,
    /// Instants, seconds, rising.
    pub time_s: Vec<f64>,
    /// Drain voltage at `time_s`, volts.
    pub drain_v: Vec<f64>,
    /// Current through the switch at `time_s`, amperes.
    pub switch_a: Vec<f64>,
    /// Voltage over the load at `time_s`, volts.
    pub load_v: Vec<f64>,
    /// Stretches of time in which the switch is closed, (from, to) in seconds.
    pub closed_s: Vec<(f64, f64)>,
    /// The further switches, where there are several.
    pub others: Vec<OtherCurves>,
    /// The exact peak of the drain voltage, (seconds, volts); the highest sample where `None`.
    pub peak_drain: Option<(f64, f64)>,
    /// The exact peak of the switch current, (seconds, amperes); the highest sample where `None`.
    pub peak_current: Option<(f64, f64)>,
}

/// A further switch at the same instants.
#[derive(Debug, Clone, Default)]
pub struct OtherCurves {
    /// What it is called.
    pub name: String,
    /// Current through it, amperes.
    pub switch_a: Vec<f64>,
    /// Voltage of its own node where that is another, volts.
    pub drain_v: Option<Vec<f64>>,
}

impl WaveformFigure {
    /// Draws it: three panels over one time axis, the closed intervals shaded, the peaks labelled.
    pub fn figure(&self) -> Figure {
        let panel =
            |index: usize, label: &str, unit: &str, values: &[f64], peak: Option<(f64, f64)>| {
                let points = pairs(&self.time_s, values);
                let mut panel = Panel::new(AxisSpec::engineering(label, unit), 112.0);
                let mut curve = Curve::numbered(0, "", points);
                curve.role = Role::curve(index);
                panel.curves.push(curve);
                if let Some(at) = peak {
                    panel.marks.push(Mark {
                        at,
                        text: format!("peak {}", quantity(at.1, unit, 3)),
                        role: Role::curve(index),
                    });
                }
                panel
            };
        let several = !self.others.is_empty();
        let first = if several && self.others.iter().all(|other| other.drain_v.is_none()) {
            "upper"
        } else {
            "first"
        };
        let further = |panel: &mut Panel, value: &dyn Fn(&OtherCurves) -> Option<Vec<f64>>| {
            let named: Vec<(&str, Vec<f64>)> = self
                .others
                .iter()
                .filter_map(|other| Some((other.name.as_str(), value(other)?)))
                .collect();
            if named.is_empty() {
                return;
            }
            for curve in &mut panel.curves {
                curve.name = first.to_owned();
            }
            for (at, (name, values)) in named.into_iter().enumerate() {
                let mut curve = Curve::numbered(at + 1, name, pairs(&self.time_s, &values));
                curve.role = Role::curve(at + 2);
                panel.curves.push(curve);
            }
        };
        let peak_drain = self
            .peak_drain
            .or_else(|| highest(&pairs(&self.time_s, &self.drain_v)));
        let peak_current = self
            .peak_current
            .or_else(|| highest(&pairs(&self.time_s, &self.switch_a)));
        let said = |name: &str, peak: Option<(f64, f64)>, unit: &str| match peak {
            Some((_, value)) => format!("{name} peaks at {}", quantity(value, unit, 3)),
            None => format!("{name} has no values"),
        };
        let description = format!(
            "{}: {}; {}.",
            self.title,
            said("drain voltage", peak_drain, "V"),
            said("switch current", peak_current, "A"),
        );
        let (drain, current) = if several {
            ("switched node", "switch currents")
        } else {
            ("drain voltage", "switch current")
        };
        let mut panels = vec![
            panel(0, drain, "V", &self.drain_v, peak_drain),
            panel(1, current, "A", &self.switch_a, peak_current),
            panel(3, "load voltage", "V", &self.load_v, None),
        ];
        further(&mut panels[0], &|other| other.drain_v.clone());
        further(&mut panels[1], &|other| Some(other.switch_a.clone()));
        let chart = Chart {
            title: self.title.clone(),
            across: AxisSpec::engineering("time", "s"),
            shades: self
                .closed_s
                .iter()
                .map(|&(from, to)| Shade {
                    name: match (several, first) {
                        (false, _) => "switch closed".to_owned(),
                        (true, first) => format!("{first} switch closed"),
                    },
                    from,
                    to,
                    role: Role::Wash,
                    opacity: 1.0,
                })
                .collect(),
            panels,
        };
        Figure::new(description, chart)
    }
}
