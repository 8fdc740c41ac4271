//! The report: plain data in, one self-contained HTML file out.
//!
//! No script, no font, no picture from elsewhere; the page forbids itself every network access.
//! The verdict stands first. Light and dark follow the reader's setting, print is always light.

mod html;
mod parts;

use super::error::ReportError;
use super::picture::Figure;

/// Everything a report says.
#[derive(Debug, Clone, Default)]
pub struct Page {
    /// Title of the study.
    pub title: String,
    /// Stage, signal and scheme in one line.
    pub subtitle: String,
    /// The verdict; `None` for pages without limits, such as a map.
    pub headline: Option<Headline>,
    /// The checks, the deciding one first.
    pub checks: Vec<CheckRow>,
    /// What the reader should beware of in this very result.
    pub warnings: Vec<String>,
    /// The numbers that matter most.
    pub key_figures: Vec<KeyFigure>,
    /// Pictures with captions, in order.
    pub figures: Vec<CaptionedFigure>,
    /// Facts about stage, map, signal, scheme.
    pub facts: Vec<FactGroup>,
    /// What the model leaves out.
    pub model_limits: Vec<String>,
    /// How to get the same result again.
    pub conditions: Conditions,
}

/// How a check, or all of them, ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Outcome {
    /// Every limit is kept.
    Within,
    /// A limit is broken.
    Outside,
    /// It cannot be said.
    #[default]
    Undecided,
}

impl Outcome {
    /// The word in tables.
    pub fn word(self) -> &'static str {
        match self {
            Self::Within => "within",
            Self::Outside => "outside",
            Self::Undecided => "undecided",
        }
    }

    fn sentence(self) -> &'static str {
        match self {
            Self::Within => "Within the limits",
            Self::Outside => "Outside the limits",
            Self::Undecided => "Could not be decided",
        }
    }
}

/// The verdict in one line.
#[derive(Debug, Clone, Default)]
pub struct Headline {
    /// Within, outside, undecided.
    pub outcome: Outcome,
    /// The reason that decided, in words.
    pub reason: String,
    /// The smallest margin of all checks, dB; `None` where there is none.
    pub margin_db: Option<f64>,
}

/// One check.
#[derive(Debug, Clone, Default)]
pub struct CheckRow {
    /// What was checked: `mask D, upper side, 5.6 to 12.5 kHz`.
    pub name: String,
    /// How it ended.
    pub outcome: Outcome,
    /// What was found, with its unit.
    pub found: String,
    /// What is allowed, with its unit.
    pub allowed: String,
    /// Margin in dB, positive is within.
    pub margin_db: Option<f64>,
    /// Why, or where; also where a limit comes from, when that is uncertain.
    pub reason: String,
}

/// A number with its name.
#[derive(Debug, Clone, Default)]
pub struct KeyFigure {
    /// `output power`
    pub name: String,
    /// `36.8 dBm`
    pub value: String,
    /// `average over the signal`; may be empty.
    pub note: String,
}

/// A figure with the text below it.
#[derive(Debug, Clone)]
pub struct CaptionedFigure {
    /// The picture.
    pub figure: Figure,
    /// What to see in it.
    pub caption: String,
}

/// Names and values under one heading.
#[derive(Debug, Clone, Default)]
pub struct FactGroup {
    /// `Stage`
    pub title: String,
    /// (name, value with unit)
    pub rows: Vec<(String, String)>,
}

/// What it takes to get the same bytes again.
#[derive(Debug, Clone, Default)]
pub struct Conditions {
    /// The command line.
    pub command: String,
    /// Version of the program.
    pub version: String,
    /// Seed of the random numbers; `None` where none were drawn.
    pub seed: Option<u64>,
    /// The input files as text: name and content.
    pub inputs: Vec<(String, String)>,
}

impl Page {
    /// The report as one HTML file.
    ///
    /// # Errors
    /// A figure cannot be drawn.
    pub fn html(&self) -> Result<String, ReportError> {
        html::page(self)
    }
}
