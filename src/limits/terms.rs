//! What a mask is made of: terms, references, detectors.

use serde::Serialize;

/// One part of a limit. P is the mean output power in W.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
#[serde(rename_all = "lowercase", tag = "form")]
pub enum Term {
    /// `db`, against the reference.
    Const {
        /// dB
        db: f64,
    },
    /// `at_db + slope_db_per_hz (offset - at_hz)`, against the reference.
    Linear {
        /// Hz
        at_hz: f64,
        /// dB
        at_db: f64,
        /// dB per Hz
        slope_db_per_hz: f64,
    },
    /// `-k_db log10(offset / f0_hz)`, against the reference.
    Log {
        /// dB per decade
        k_db: f64,
        /// Hz
        f0_hz: f64,
    },
    /// `-(c_db + 10 log10 P)`, against the reference.
    Power {
        /// dB
        c_db: f64,
    },
    /// An absolute power.
    Absolute {
        /// dBm
        dbm: f64,
    },
}

/// How the terms of a segment make one limit.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Combine {
    /// There is one term.
    Single,
    /// The highest holds ("the lesser attenuation").
    MostLenient,
    /// The lowest holds.
    Strictest,
    /// Each must be met.
    Both,
}

/// What relative levels are relative to.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Reference {
    /// The transmitter's output power.
    OutputPower,
    /// The power of the carrier without modulation; the power in the channel where no carrier is stated.
    UnmodulatedCarrierPower,
    /// The mean power of the emission.
    MeanPower,
    /// The mean power in the channel.
    MeanPowerInChannel,
    /// The peak of the emission seen through a filter wide enough to show it: the peak envelope power.
    PeakOfHighestEmissionInAuthorizedBandwidth,
    /// The highest reading within the channel, in the segment's own bandwidth.
    PeakPsdInChannel,
    /// The highest mean reading within 1 MHz of the carrier, in the segment's own bandwidth.
    #[serde(rename = "peak_average_psd_within_1mhz_of_carrier")]
    PeakAveragePsdWithin1MhzOfCarrier,
    /// The mean power in 30 kHz on the carrier, whatever the segment's own bandwidth.
    #[serde(rename = "power_in_30khz_on_carrier")]
    PowerIn30KhzOnCarrier,
    /// None: levels are absolute.
    AbsoluteDbm,
}

impl Reference {
    /// In words, for a reason.
    pub fn words(self) -> &'static str {
        match self {
            Self::OutputPower => "the output power",
            Self::UnmodulatedCarrierPower => "the unmodulated carrier",
            Self::MeanPower => "the mean power",
            Self::MeanPowerInChannel => "the mean power in the channel",
            Self::PeakOfHighestEmissionInAuthorizedBandwidth => "the peak envelope power",
            Self::PeakPsdInChannel => "the highest density in the channel",
            Self::PeakAveragePsdWithin1MhzOfCarrier => {
                "the highest mean within 1 MHz of the carrier"
            }
            Self::PowerIn30KhzOnCarrier => "30 kHz on the carrier",
            Self::AbsoluteDbm => "nothing (absolute)",
        }
    }
}

/// How a reading is taken from a level that moves.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Detector {
    /// Mean power.
    Mean,
    /// The largest of all readings.
    PeakHold,
}

impl Detector {
    /// In words, for tables and reasons.
    pub fn words(self) -> &'static str {
        match self {
            Self::Mean => "mean",
            Self::PeakHold => "peak hold",
        }
    }
}

/// Where offset 0 is. In a baseband spectrum the first four are one place, its centre; they are kept
/// apart because the documents name them.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Origin {
    /// The carrier.
    Carrier,
    /// The assigned frequency.
    AssignedFrequency,
    /// The centre of the channel.
    ChannelCenter,
    /// The centre of the authorized bandwidth.
    CenterOfAuthorizedBandwidth,
    /// The edge of the channel, outwards.
    ChannelEdge,
}

impl Origin {
    /// In words, for tables.
    pub fn words(self) -> &'static str {
        match self {
            Self::Carrier => "the carrier",
            Self::AssignedFrequency => "the assigned frequency",
            Self::ChannelCenter => "the centre of the channel",
            Self::CenterOfAuthorizedBandwidth => "the centre of the authorized bandwidth",
            Self::ChannelEdge => "the edge of the channel, outwards",
        }
    }
}

/// Where the measuring filter may stand in its segment.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Placement {
    /// Its centre runs from one end of the segment to the other.
    Centre,
    /// The whole filter stays inside the segment; in the middle of one that is narrower.
    Inside,
}
