//! Margin over the size of a table.

use crate::report::palette::Role;
use crate::report::picture::{AxisSpec, Chart, Curve, Dash, Figure, Panel};

/// The smallest margin over bits, one quantity varied at a time.
#[derive(Debug, Clone, Default)]
pub struct MarginFigure {
    /// What is shown.
    pub title: String,
    /// Curves.
    pub curves: Vec<MarginCurve>,
    /// The margin that must be left, dB.
    pub reserve_db: f64,
}

/// One quantity varied.
#[derive(Debug, Clone, Default)]
pub struct MarginCurve {
    /// As the legend says it.
    pub name: String,
    /// (bits, or the logarithm to base 2 of the entries; margin in dB), rising.
    pub points: Vec<(f64, f64)>,
}

impl MarginFigure {
    /// Draws it, the reserve as a line.
    pub fn figure(&self) -> Figure {
        let mut panel = Panel::new(AxisSpec::plain("smallest margin", "dB"), 260.0);
        for (index, curve) in self.curves.iter().enumerate() {
            panel
                .curves
                .push(Curve::numbered(index, &curve.name, curve.points.clone()));
        }
        let all = || {
            self.curves
                .iter()
                .flat_map(|curve| &curve.points)
                .map(|point| point.0)
        };
        let (low, high) = (
            all().fold(f64::INFINITY, f64::min),
            all().fold(f64::NEG_INFINITY, f64::max),
        );
        if low <= high {
            let mut line = Curve::numbered(
                self.curves.len(),
                "reserve asked for",
                vec![(low, self.reserve_db), (high, self.reserve_db)],
            );
            (line.role, line.dash) = (Role::Limit, Dash::Solid);
            panel.curves.push(line);
        }
        let description = format!(
            "{}: the smallest margin of all limits over the bits of the table, with {} dB asked for.",
            self.title, self.reserve_db
        );
        Figure::new(
            description,
            Chart {
                title: self.title.clone(),
                across: AxisSpec::plain("bits (entries: 2 to the power of)", ""),
                shades: Vec::new(),
                panels: vec![panel],
            },
        )
    }
}
