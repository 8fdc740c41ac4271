//! Results to bytes: text tables, pictures (SVG, PNG) and the self-contained HTML report. No I/O.
//!
//! The types here are views: plain data that say what is shown. Whoever has results fills them;
//! nothing here computes a result.
//!
//! ```text
//! figures::SpectrumFigure { .. }.figure() -> Figure   .svg(), .png()
//! page::Page { .. }.html()                -> one HTML file
//! table::Table                            -> aligned text for the terminal
//! ```

pub mod cautions;
pub mod check;
pub mod compare;
pub mod design;
pub mod documents;
mod error;
pub mod figures;
pub mod gate;
mod held;
pub mod limits;
pub mod measure;
pub mod mismatch;
pub mod page;
pub mod palette;
pub mod picture;
pub mod predistort;
pub mod scheme;
pub mod stage;
pub mod stress;
pub mod table;
mod text;

pub use error::ReportError;
pub use picture::Figure;
