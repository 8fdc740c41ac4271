//! A limit mask by itself.

use crate::report::picture::{AxisSpec, Chart, Curve, Figure, Panel};

/// One line that the spectrum must stay below.
#[derive(Debug, Clone, Default)]
pub struct MaskLine {
    /// As the legend says it: the set's name.
    pub name: String,
    /// (offset from the carrier in hertz, level); a point that is not finite breaks the line.
    pub points: Vec<(f64, f64)>,
}

/// The masks of a set, without a spectrum.
#[derive(Debug, Clone, Default)]
pub struct MaskFigure {
    /// What is shown: the set's title.
    pub title: String,
    /// The vertical axis in words: `dB relative to the unmodulated carrier`.
    pub level_axis: String,
    /// Both sides of every line.
    pub lines: Vec<MaskLine>,
}

impl MaskFigure {
    /// Draws it, with the forbidden ground tinted.
    pub fn figure(&self) -> Figure {
        let mut panel = Panel::new(AxisSpec::plain(self.level_axis.clone(), ""), 260.0);
        for line in &self.lines {
            panel
                .curves
                .push(Curve::limit(&line.name, line.points.clone()));
        }
        let names: Vec<&str> = self.lines.iter().map(|line| line.name.as_str()).collect();
        let description = format!("{}: the limit lines {}.", self.title, names.join(", "));
        Figure::new(
            description,
            Chart {
                title: self.title.clone(),
                across: AxisSpec::engineering("offset from the carrier", "Hz"),
                shades: Vec::new(),
                panels: vec![panel],
            },
        )
    }
}
