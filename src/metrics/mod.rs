//! STEP 6: numbers about the output.

mod channel;
mod envelope;
mod occupied;
mod plan;
mod spectrum;
mod welch;

pub use channel::{AdjacentChannel, ChannelFilter, adjacent_channels, channel_power_w};
pub use envelope::{EnvelopeFigures, EnvelopeMeter};
pub use occupied::{OccupiedBand, occupied_bandwidth};
pub use plan::{Hold, SpectrumPlan};
pub use spectrum::{Spectrum, SpectrumError};
pub use welch::SpectrumMeter;
