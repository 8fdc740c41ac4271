//! SECOND INPUT: the wanted complex baseband, from files and generators.

mod error;
mod source;

pub use error::SignalError;
pub use source::{Samples, Source};
