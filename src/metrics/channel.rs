//! Power in a channel, and in its neighbours against it.

use super::spectrum::{Spectrum, SpectrumError};
use crate::units::db;

/// The filter through which a channel's power is measured.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
#[serde(rename_all = "snake_case", tag = "kind")]
pub enum ChannelFilter {
    /// Flat over its width, nothing outside.
    Flat {
        /// Full width, Hz.
        bandwidth_hz: f64,
    },
    /// Root-raised cosine: its power response is the raised cosine, one at the centre.
    RootRaisedCosine {
        /// Symbol rate, Hz; also the noise bandwidth.
        symbol_rate_hz: f64,
        /// Roll-off, 0 to 1.
        rolloff: f64,
    },
}

impl ChannelFilter {
    /// Noise bandwidth, Hz.
    pub fn bandwidth_hz(&self) -> f64 {
        match *self {
            Self::Flat { bandwidth_hz } => bandwidth_hz,
            Self::RootRaisedCosine { symbol_rate_hz, .. } => symbol_rate_hz,
        }
    }

    /// Full width beyond which nothing passes, Hz.
    pub fn span_hz(&self) -> f64 {
        match *self {
            Self::Flat { bandwidth_hz } => bandwidth_hz,
            Self::RootRaisedCosine {
                symbol_rate_hz,
                rolloff,
            } => symbol_rate_hz * (1.0 + rolloff),
        }
    }

    /// Power response at `hz` from the channel's centre, 0 to 1.
    pub fn power_response(&self, hz: f64) -> f64 {
        match *self {
            Self::Flat { .. } => 1.0,
            Self::RootRaisedCosine {
                symbol_rate_hz,
                rolloff,
            } => {
                let distance = hz.abs() - (1.0 - rolloff) * symbol_rate_hz / 2.0;
                if distance <= 0.0 {
                    1.0
                } else if distance >= rolloff * symbol_rate_hz {
                    0.0
                } else {
                    let phase = std::f64::consts::PI * distance / (rolloff * symbol_rate_hz);
                    (1.0 + phase.cos()) / 2.0
                }
            }
        }
    }
}

/// Mean power through `filter` centred on `centre_hz` from the carrier, W.
///
/// # Errors
/// [`SpectrumError::OutOfRange`].
pub fn channel_power_w(
    spectrum: &Spectrum,
    centre_hz: f64,
    filter: &ChannelFilter,
) -> Result<f64, SpectrumError> {
    let half = filter.span_hz() / 2.0;
    spectrum.weighted_w(centre_hz - half, centre_hz + half, |hz| {
        filter.power_response(hz - centre_hz)
    })
}

/// Power in a pair of neighbouring channels against the main one.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct AdjacentChannel {
    /// Centre to centre, Hz, positive.
    pub offset_hz: f64,
    /// Noise bandwidth of the neighbour's filter, Hz.
    pub bandwidth_hz: f64,
    /// The neighbour below the carrier, dB against the main channel.
    pub lower_db: f64,
    /// The neighbour above the carrier, dB against the main channel.
    pub upper_db: f64,
}

/// ACPR: the power through `neighbours` (offset in Hz, filter) below and above, against the power through `main`.
///
/// # Errors
/// [`SpectrumError::OutOfRange`].
pub fn adjacent_channels(
    spectrum: &Spectrum,
    main: &ChannelFilter,
    neighbours: &[(f64, ChannelFilter)],
) -> Result<Vec<AdjacentChannel>, SpectrumError> {
    let reference_w = channel_power_w(spectrum, 0.0, main)?;
    neighbours
        .iter()
        .map(|(offset_hz, filter)| {
            Ok(AdjacentChannel {
                offset_hz: *offset_hz,
                bandwidth_hz: filter.bandwidth_hz(),
                lower_db: db(channel_power_w(spectrum, -offset_hz, filter)? / reference_w),
                upper_db: db(channel_power_w(spectrum, *offset_hz, filter)? / reference_w),
            })
        })
        .collect()
}
