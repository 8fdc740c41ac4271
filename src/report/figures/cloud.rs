//! Output amplitude over wanted amplitude as a two-dimensional density: the AM-AM cloud.

use crate::report::palette::Role;
use crate::report::picture::{AxisSpec, Cell, Chart, Curve, Dash, Figure, Panel};

/// Columns and rows of the raster.
const COLUMNS: usize = 80;
const ROWS: usize = 56;
/// Shades between empty and densest, on a logarithmic scale over four decades.
const SHADES: f64 = 5.0;
const DECADES: f64 = 4.0;

/// Samples of two quantities against each other.
#[derive(Debug, Clone, Default)]
pub struct CloudFigure {
    /// What is shown.
    pub title: String,
    /// Axis across in words, with its unit: `wanted amplitude, share of full scale`.
    pub across: String,
    /// Axis upwards in words, with its unit.
    pub up: String,
    /// (across, up) of every sample.
    pub samples: Vec<(f64, f64)>,
    /// A line to compare with, such as the static map; may be empty.
    pub line: Vec<(f64, f64)>,
    /// As the legend says the line.
    pub line_name: String,
}

impl CloudFigure {
    /// Draws it: the darker, the more samples (logarithmic, four decades).
    pub fn figure(&self) -> Figure {
        let mut panel = Panel::new(AxisSpec::plain(self.up.clone(), ""), 280.0);
        panel.cells = self.cells();
        panel.cells_name = "samples, darker where more".to_owned();
        if !self.line.is_empty() {
            let mut curve = Curve::numbered(1, &self.line_name, self.line.clone());
            curve.width = 1.8;
            // A rim of paper keeps the line apart from the cells.
            let mut rim = Curve::numbered(1, "", self.line.clone());
            (rim.role, rim.width, rim.dash) = (Role::Paper, 5.0, Dash::Solid);
            panel.curves.push(rim);
            panel.curves.push(curve);
        }
        let description = format!(
            "{}: density of {} samples, {} over {}.",
            self.title,
            self.samples.len(),
            self.up,
            self.across
        );
        Figure::new(
            description,
            Chart {
                title: self.title.clone(),
                across: AxisSpec::plain(self.across.clone(), ""),
                shades: Vec::new(),
                panels: vec![panel],
            },
        )
    }

    /// The raster, neighbours of the same shade in a row joined.
    pub(super) fn cells(&self) -> Vec<Cell> {
        let usable = |value: f64| value.is_finite() && value.abs() < 1e15;
        let samples = || {
            self.samples
                .iter()
                .filter(|sample| usable(sample.0) && usable(sample.1))
        };
        let Some(&first) = samples().next() else {
            return Vec::new();
        };
        let (low, high) = samples().fold((first, first), |(low, high), sample| {
            (
                (low.0.min(sample.0), low.1.min(sample.1)),
                (high.0.max(sample.0), high.1.max(sample.1)),
            )
        });
        let step = (
            ((high.0 - low.0) / COLUMNS as f64).max(1e-9 * (1e-9 + high.0.abs())),
            ((high.1 - low.1) / ROWS as f64).max(1e-9 * (1e-9 + high.1.abs())),
        );
        let mut counts = vec![0u64; COLUMNS * ROWS];
        for sample in samples() {
            let column = (((sample.0 - low.0) / step.0) as usize).min(COLUMNS - 1);
            let row = (((sample.1 - low.1) / step.1) as usize).min(ROWS - 1);
            counts[row * COLUMNS + column] += 1;
        }
        let most = counts.iter().copied().max().unwrap_or(1).max(1) as f64;
        let shade = |count: u64| {
            if count == 0 {
                return 0.0;
            }
            let below = (most / count as f64).log10() / DECADES;
            ((1.0 - below) * SHADES).ceil().clamp(1.0, SHADES)
        };
        let mut cells = Vec::new();
        for (row, line) in counts.chunks_exact(COLUMNS).enumerate() {
            let mut column = 0;
            for run in line.chunk_by(|a, b| shade(*a) == shade(*b)) {
                let strength = 0.85 * shade(run[0]) / SHADES;
                if strength > 0.0 {
                    let y = low.1 + row as f64 * step.1;
                    cells.push(Cell {
                        from: (low.0 + column as f64 * step.0, y),
                        to: (low.0 + (column + run.len()) as f64 * step.0, y + step.1),
                        strength: (strength * 100.0).round() / 100.0,
                    });
                }
                column += run.len();
            }
        }
        cells
    }
}
