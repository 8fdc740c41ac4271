//! SECOND INPUT: the wanted complex baseband, from files and generators.

mod blocks;
mod error;
mod format;
mod levels;
mod modulation;
mod npy;
mod ofdm;
mod open;
mod oversample;
mod pulse;
mod recipe;
mod shaping;
mod sigmf;
mod source;
mod text;
mod tones;
mod vcd;
mod wav;
mod write;

pub use error::SignalError;
pub use format::{Format, FormatOptions};
pub use levels::Levels;
pub use modulation::Modulation;
pub use ofdm::{Centre, Ofdm};
pub use open::{PulseFormat, PulseOptions, open, open_pulses, read_edges};
pub use oversample::Oversampled;
pub use pulse::{Edge, MOST_EDGES, PulseList, PulseSource};
pub use recipe::{Ends, Kind, MOST_SAMPLES, Recipe, make};
pub use shaping::{SingleCarrier, root_raised_cosine};
pub use sigmf::sigmf_meta;
pub use source::{Samples, Source};
pub use tones::{Noise, Phases, Ramp, Tones};
pub use write::{Writing, write};
