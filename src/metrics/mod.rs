//! STEP 6: numbers about the output.

mod channel;
mod spectrum;

pub use channel::{AdjacentChannel, ChannelFilter, adjacent_channels, channel_power_w};
pub use spectrum::{Spectrum, SpectrumError};
