//! A pulse sequence that a modulator elsewhere has made.

use std::sync::Arc;

use crate::input::{Files, Problem, Range, Section};
use crate::signal::{Edge, PulseFormat, PulseOptions, read_edges};
use crate::units::Dimension;

/// Edges may be off their grid by this part of it.
const OFF_GRID: f64 = 0.01;

/// The sequence that a study names.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct PulseFile {
    /// Relative to the study.
    pub file: String,
    /// When it starts, counted from the signal's first sample, s.
    pub start_s: f64,
    /// How it is read.
    #[serde(skip)]
    pub options: PulseOptions,
    /// What it holds.
    #[serde(skip)]
    pub sequence: Arc<PulseSequence>,
}

/// Levels of a gate over time.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct PulseSequence {
    /// Times from its start, rising; levels from 0 to 1.
    pub edges: Vec<Edge>,
    /// When it ends, s: as its file says, else with its last edge.
    pub end_s: f64,
}

impl PulseSequence {
    /// Mean number of edges a second.
    pub fn edges_per_s(&self) -> f64 {
        self.edges.len() as f64 / self.end_s.max(1e-12)
    }
}

const FORMATS: [(&str, PulseFormat); 3] = [
    ("wav", PulseFormat::Wav),
    ("csv", PulseFormat::Csv),
    ("vcd", PulseFormat::Vcd),
];

/// The table `pulses` of a scheme: the file that it names is read by [`PulseFile::load`].
///
/// # Errors
/// The first thing wrong, with its place.
pub(in crate::drive) fn read_pulses(section: &Section<'_>) -> Result<Option<PulseFile>, Problem> {
    let Some(section) = section.maybe_section("pulses")? else {
        return Ok(None);
    };
    let pulses = PulseFile {
        file: section.text("file")?.to_owned(),
        start_s: section
            .maybe_quantity("start", Dimension::Time, Range::NotNegative)?
            .unwrap_or(0.0),
        options: PulseOptions {
            format: section.maybe_choice("format", &FORMATS)?,
            signal: section.maybe_text("signal")?.map(str::to_owned),
            full_scale: section.maybe_quantity("full_scale", Dimension::Ratio, Range::Positive)?,
            threshold: section.maybe_quantity("threshold", Dimension::Ratio, Range::Positive)?,
        },
        sequence: Arc::default(),
    };
    section.finish()?;
    Ok(Some(pulses))
}

impl PulseFile {
    /// The same with what its file holds; `scheme` is the table that it stands in, `grid_s` the grid of the scheme's edges.
    ///
    /// # Errors
    /// A file that cannot be read or is wrong; edges off the grid.
    pub fn load(
        &self,
        files: &dyn Files,
        scheme: &Section<'_>,
        grid_s: Option<f64>,
    ) -> Result<Self, Problem> {
        let pulses = scheme.section("pulses")?;
        let list = read_edges(files, &self.file, &self.options)
            .map_err(|error| pulses.problem("file", format!("a pulse sequence ({error})")))?;
        if let Some(grid_s) = grid_s {
            let off = list.edges.iter().position(|edge| {
                let steps = edge.time_s / grid_s;
                (steps - steps.round()).abs() > OFF_GRID + 1e-9 * steps
            });
            if let Some(at) = off {
                return Err(scheme.problem(
                    "grid",
                    format!(
                        "a grid on which all edges of {} lie: edge {at} (counted from 0) is at {} s",
                        self.file, list.edges[at].time_s
                    ),
                ));
            }
        }
        let last_s = list.edges.last().map_or(0.0, |edge| edge.time_s);
        Ok(Self {
            sequence: Arc::new(PulseSequence {
                end_s: list.end_s.unwrap_or(last_s),
                edges: list.edges,
            }),
            ..self.clone()
        })
    }
}
