//! Settings files: TOML with positions, so that every complaint points at a place.

mod files;
mod problem;
mod section;

pub use files::{Files, MAX_TEXT_BYTES, ReadSeek, read_text};
pub use problem::{Complaint, Place, Problem};
pub use section::{Document, Range, Section, nearest};
