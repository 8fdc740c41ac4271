//! SECOND INPUT: the wanted complex baseband, from files and generators.

mod error;
mod oversample;
mod source;

pub use error::SignalError;
pub use oversample::Oversampled;
pub use source::{Samples, Source};
