//! Settings files: TOML with positions, so that every complaint points at a place.

mod document;
mod files;
mod problem;
mod range;
mod section;
mod values;

pub use document::Document;
pub use files::{Files, MAX_TEXT_BYTES, ReadSeek, read_text};
pub use problem::{Complaint, Place, Problem};
pub use range::Range;
pub use section::{Section, nearest};
