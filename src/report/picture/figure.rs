//! A figure: one chart, drawn on demand.

use super::chart::Chart;
use super::layout::{self, Format};
use super::{png, svg};
use crate::report::error::ReportError;

/// A picture with its title and its description in words.
#[derive(Debug, Clone)]
pub struct Figure {
    title: String,
    description: String,
    chart: Chart,
}

impl Figure {
    pub(crate) fn new(description: String, chart: Chart) -> Self {
        Self {
            title: chart.title.clone(),
            description,
            chart,
        }
    }

    /// What the figure shows and in which units, as drawn above it.
    pub fn title(&self) -> &str {
        &self.title
    }

    /// What the figure says, for readers who cannot see it.
    pub fn description(&self) -> &str {
        &self.description
    }

    /// A stand-alone SVG file, 720 px wide, whose colours follow the reader's light or dark setting.
    ///
    /// # Errors
    /// The drawing library refuses.
    pub fn svg(&self) -> Result<String, ReportError> {
        let canvas = layout::draw(&self.chart, Format::Wide);
        svg::standalone(&canvas, &self.description).map_err(|reason| self.refused(reason))
    }

    /// A PNG file, 1440 px wide, on light paper.
    ///
    /// # Errors
    /// The drawing library or the encoder refuses.
    pub fn png(&self) -> Result<Vec<u8>, ReportError> {
        let canvas = layout::draw(&self.chart, Format::Wide);
        png::draw(&canvas)
            .map_err(|reason| self.refused(reason))?
            .map_err(|source| ReportError::Encoding {
                figure: self.title.clone(),
                source,
            })
    }

    /// Two SVG elements for a page, of the classes `wide` and `narrow`: the page shows one of them.
    pub(crate) fn inline(&self) -> Result<String, ReportError> {
        let mut both = String::new();
        for (format, class) in [(Format::Wide, "wide"), (Format::Narrow, "narrow")] {
            let canvas = layout::draw(&self.chart, format);
            both += &svg::inline(&canvas, &self.description, class)
                .map_err(|reason| self.refused(reason))?;
        }
        Ok(both)
    }

    fn refused(&self, reason: String) -> ReportError {
        ReportError::Drawing {
            figure: self.title.clone(),
            reason,
        }
    }
}
