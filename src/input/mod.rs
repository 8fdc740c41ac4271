//! Settings files: TOML with positions, so that every complaint points at a place.

mod document;
mod files;
mod json;
mod problem;
mod range;
mod section;
mod values;

pub use document::Document;
pub use files::{Files, ReadSeek, read_text};
pub use json::parse_json;
pub use problem::{Complaint, Place, Problem};
pub use range::Range;
pub use section::{Section, nearest};
