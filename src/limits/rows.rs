//! Limits that come as rows: neighbouring channels, error vectors, spurious emissions.

use serde::Serialize;

use super::terms::Term;
use crate::metrics::ChannelFilter;

/// Which equipment and which output powers a row is for. Both powers are included; at a power that
/// two rows share, the row that stands first holds.
#[derive(Debug, Clone, PartialEq, Default, Serialize)]
pub struct Applies {
    /// In words, as in the document.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub words: Option<String>,
    /// Lowest output power, W.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub min_power_w: Option<f64>,
    /// Highest output power, W.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub max_power_w: Option<f64>,
    /// Equipment classes; empty for all.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub classes: Vec<String>,
}

impl Applies {
    /// True where the row holds for `power_w`.
    pub fn at_power(&self, power_w: f64) -> bool {
        self.min_power_w.is_none_or(|min| power_w >= min)
            && self.max_power_w.is_none_or(|max| power_w <= max)
    }

    /// True where the row does not hold for every power.
    pub fn depends_on_power(&self) -> bool {
        self.min_power_w.is_some() || self.max_power_w.is_some()
    }

    /// True where the row is for `class`; a class not stated excludes no row.
    pub fn to_class(&self, class: Option<&str>) -> bool {
        self.classes.is_empty() || class.is_none_or(|class| self.classes.iter().any(|c| c == class))
    }
}

/// The filter through which the wanted channel is read for a ratio.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum MainFilter {
    /// Flat over the whole channel.
    Channel,
    /// The neighbour's own filter, moved onto the carrier.
    SameFilter,
}

/// Limits on the power in neighbouring channels.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Adjacent {
    /// How the wanted channel is read.
    pub reference: MainFilter,
    /// Channel width, Hz, where the set is for one.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub channel_hz: Option<f64>,
    /// Nothing tighter than this power is required, dBm.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub floor_dbm: Option<f64>,
    /// The limit does not count where the neighbour holds less than this, dBm.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub ignore_below_dbm: Option<f64>,
    /// Beyond this offset, Hz, the term holds for every reading in the rows' own bandwidth.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub beyond: Option<(f64, Term)>,
    /// One row for each neighbour; each holds below and above the carrier.
    pub rows: Vec<AdjacentRow>,
}

/// One neighbouring channel.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct AdjacentRow {
    /// Centre to centre, Hz.
    pub offset_hz: f64,
    /// How the neighbour is read.
    pub filter: ChannelFilter,
    /// dB against the wanted channel.
    pub limit_db: f64,
    /// Only for channels of this width, Hz.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub channel_hz: Option<f64>,
    /// Which equipment and powers it is for.
    #[serde(flatten)]
    pub applies: Applies,
}

/// Which number of the error vector's distribution is limited.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Statistic {
    /// Root mean square.
    Rms,
    /// Largest.
    Peak,
    /// Not exceeded by 95 % of the symbols.
    P95,
    /// Not exceeded by 99 % of the symbols.
    P99,
}

impl Statistic {
    /// The word in files and listings.
    pub fn word(self) -> &'static str {
        match self {
            Self::Rms => "rms",
            Self::Peak => "peak",
            Self::P95 => "p95",
            Self::P99 => "p99",
        }
    }
}

/// Limits on the error vector magnitude.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Modulation {
    /// What the error is measured against.
    pub reference: String,
    /// Rows by modulation, statistic and equipment.
    pub rows: Vec<ErrorRow>,
}

/// One limit of the error vector magnitude.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct ErrorRow {
    /// As the document calls it; empty for all.
    pub modulation: String,
    /// Code rate, where the limit depends on it.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub coding: Option<String>,
    /// Data rate, Mbit/s, for information.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub rate_mbps: Option<f64>,
    /// What is limited.
    pub statistic: Statistic,
    /// Percent of the reference.
    pub limit_percent: f64,
    /// Which equipment it is for.
    #[serde(flatten)]
    pub applies: Applies,
}

/// Limits on emissions far from the carrier.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Spurious {
    /// Rows by equipment and output power.
    pub rows: Vec<SpuriousRow>,
}

/// One limit on emissions far from the carrier: `limit_db` against the mean power of the wanted
/// emission, and `cap_w` at most, but never below `floor_w`.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SpuriousRow {
    /// dB against the mean power of the fundamental.
    pub limit_db: f64,
    /// No emission may exceed this, W.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub cap_w: Option<f64>,
    /// No emission need be below this, W.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub floor_w: Option<f64>,
    /// Which equipment and powers it is for.
    #[serde(flatten)]
    pub applies: Applies,
}

/// Facts about a signal.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SignalFormat {
    /// As the document calls it.
    pub modulation: String,
    /// Symbol rate, Hz.
    pub symbol_rate_hz: f64,
    /// Roll-off of its root-raised-cosine filter, where it has one.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub rolloff: Option<f64>,
    /// Channel width, Hz.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub channel_hz: Option<f64>,
    /// Residual carrier allowed, percent.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub residual_carrier_max_percent: Option<f64>,
}
