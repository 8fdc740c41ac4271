//! SECOND INPUT: the wanted complex baseband, from files and generators.

mod blocks;
mod error;
mod format;
mod npy;
mod open;
mod pulse;
mod source;
mod text;
mod wav;

pub use error::SignalError;
pub use format::{Format, FormatOptions};
pub use open::{open, open_pulses};
pub use pulse::{Edge, PulseSource};
pub use source::{Samples, Source};
