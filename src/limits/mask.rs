//! Masks: levels that must not be exceeded over the offset from the carrier.

use serde::Serialize;

use super::rows::Applies;
use super::terms::{Combine, Detector, Origin, Placement, Reference, Term};
use crate::units::{db, dbm_from_watt};

/// A frequency in Hz or as a fraction of the authorized bandwidth.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Corner {
    /// Hz
    Hz(f64),
    /// Times the authorized bandwidth.
    Fraction(f64),
}

impl Corner {
    /// Hz from the origin.
    ///
    /// # Errors
    /// [`NotStated::AuthorizedBandwidth`].
    pub fn hz(self, conditions: &Conditions) -> Result<f64, NotStated> {
        match self {
            Self::Hz(hz) => Ok(hz),
            Self::Fraction(fraction) => conditions
                .authorized_bandwidth_hz
                .map(|bandwidth_hz| fraction * bandwidth_hz)
                .ok_or(NotStated::AuthorizedBandwidth),
        }
    }
}

/// One stretch of a mask: it holds for `from < offset <= to`, and from 0 includes 0. A segment with
/// `from = to` is one single offset.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Segment {
    /// Where it starts.
    pub from: Corner,
    /// Where it ends; open-ended without.
    pub to: Option<Corner>,
    /// Resolution or integration bandwidth, Hz; 0 where the rule fixes none.
    pub bw_hz: f64,
    /// A peak-hold reading in `bw_hz` is the sum of those in this bandwidth, Hz, over `bw_hz`.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub sum_of_bw_hz: Option<f64>,
    /// Where the measuring filter may stand.
    pub placement: Placement,
    /// How the terms make one limit.
    pub combine: Combine,
    /// At least one.
    pub terms: Vec<Term>,
    /// Which equipment and powers it is for.
    #[serde(flatten)]
    pub applies: Applies,
}

/// Levels over the offset from the carrier; each segment holds below and above it.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Mask {
    /// What relative levels are relative to.
    pub reference: Reference,
    /// Where offset 0 is.
    pub origin: Origin,
    /// How readings are taken.
    pub detector: Detector,
    /// Channel width, Hz, where the set is for one.
    pub channel_hz: Option<f64>,
    /// Authorized bandwidth, Hz, where the set is for one.
    pub authorized_bandwidth_hz: Option<f64>,
    /// Nothing tighter than this reading is required, dBm.
    pub floor_dbm: Option<f64>,
    /// In the file's order.
    pub segments: Vec<Segment>,
}

/// What the limits of a mask depend on besides the offset.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Conditions {
    /// Mean output power, W.
    pub power_w: Option<f64>,
    /// The reference, dBm; where a rule mixes relative and absolute levels and this is absent, the
    /// output power stands for it.
    pub reference_dbm: Option<f64>,
    /// Authorized bandwidth, Hz.
    pub authorized_bandwidth_hz: Option<f64>,
    /// Channel width, Hz.
    pub channel_hz: Option<f64>,
}

/// A condition that a limit needs and nobody stated.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum NotStated {
    /// The mean output power.
    #[error("the limit depends on the output power, which is not stated")]
    Power,
    /// The authorized bandwidth.
    #[error(
        "the limit depends on the authorized bandwidth, which is not stated: add authorized_bandwidth to [limits]"
    )]
    AuthorizedBandwidth,
    /// The channel width.
    #[error("the limit depends on the channel width, which is not stated: add channel to [limits]")]
    Channel,
}

/// The limit at one offset.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum LimitLevel {
    /// dB against the reference.
    Relative {
        /// dB
        db: f64,
    },
    /// Absolute.
    Absolute {
        /// dBm
        dbm: f64,
    },
    /// Each of two must be met.
    Both {
        /// dB against the reference
        db: f64,
        /// dBm
        dbm: f64,
    },
}

impl LimitLevel {
    /// The lower of what it asks for, dBm, with the reference at `reference_dbm`.
    pub fn dbm(self, reference_dbm: f64) -> f64 {
        match self {
            Self::Relative { db } => reference_dbm + db,
            Self::Absolute { dbm } => dbm,
            Self::Both { db, dbm } => (reference_dbm + db).min(dbm),
        }
    }
}

impl Segment {
    /// Its ends, Hz from the origin; the upper is infinite for an open-ended one.
    ///
    /// # Errors
    /// [`NotStated::AuthorizedBandwidth`].
    pub fn ends_hz(&self, conditions: &Conditions) -> Result<(f64, f64), NotStated> {
        let to_hz = self
            .to
            .map_or(Ok(f64::INFINITY), |corner| corner.hz(conditions))?;
        Ok((self.from.hz(conditions)?, to_hz))
    }

    /// The limit of this segment at `offset_hz` from the origin, whether it holds there or not.
    ///
    /// # Errors
    /// [`NotStated::Power`].
    pub fn level(&self, offset_hz: f64, conditions: &Conditions) -> Result<LimitLevel, NotStated> {
        let power = || conditions.power_w.ok_or(NotStated::Power);
        let mut relative: Vec<f64> = Vec::new();
        let mut absolute: Vec<f64> = Vec::new();
        for term in &self.terms {
            match *term {
                Term::Const { db } => relative.push(db),
                Term::Linear {
                    at_hz,
                    at_db,
                    slope_db_per_hz,
                } => relative.push(at_db + slope_db_per_hz * (offset_hz - at_hz)),
                Term::Log { k_db, f0_hz } => relative.push(-k_db * (offset_hz / f0_hz).log10()),
                Term::Power { c_db } => relative.push(-(c_db + db(power()?))),
                Term::Absolute { dbm } => absolute.push(dbm),
            }
        }
        let pick: fn(f64, f64) -> f64 = match self.combine {
            Combine::MostLenient => f64::max,
            Combine::Single | Combine::Strictest | Combine::Both => f64::min,
        };
        let db = relative.into_iter().reduce(pick);
        let dbm = absolute.into_iter().reduce(pick);
        Ok(match (db, dbm) {
            (Some(db), None) => LimitLevel::Relative { db },
            (None, Some(dbm)) => LimitLevel::Absolute { dbm },
            (Some(db), Some(dbm)) if self.combine == Combine::Both => LimitLevel::Both { db, dbm },
            (Some(db), Some(dbm)) => {
                let reference_dbm = match conditions.reference_dbm {
                    Some(reference_dbm) => reference_dbm,
                    None => dbm_from_watt(power()?),
                };
                LimitLevel::Absolute {
                    dbm: pick(reference_dbm + db, dbm),
                }
            }
            // A segment is never read without terms.
            (None, None) => LimitLevel::Absolute { dbm: f64::INFINITY },
        })
    }
}

impl Mask {
    /// How far the origin of offsets is from the carrier, Hz: half the channel for offsets from its edge.
    ///
    /// # Errors
    /// [`NotStated::Channel`].
    pub fn origin_hz(&self, conditions: &Conditions) -> Result<f64, NotStated> {
        match self.origin {
            Origin::ChannelEdge => self
                .with_own(conditions)
                .channel_hz
                .map(|channel_hz| channel_hz / 2.0)
                .ok_or(NotStated::Channel),
            _ => Ok(0.0),
        }
    }

    /// `conditions`, with the channel and authorized bandwidth that the set itself fixes.
    pub fn with_own(&self, conditions: &Conditions) -> Conditions {
        Conditions {
            channel_hz: self.channel_hz.or(conditions.channel_hz),
            authorized_bandwidth_hz: self
                .authorized_bandwidth_hz
                .or(conditions.authorized_bandwidth_hz),
            ..*conditions
        }
    }

    /// The segments that hold for the power and `class`, each with its index. Of two over the same
    /// ends, both for the power, the first holds.
    ///
    /// # Errors
    /// [`NotStated::Power`].
    pub fn segments_for(
        &self,
        class: Option<&str>,
        conditions: &Conditions,
    ) -> Result<Vec<(usize, &Segment)>, NotStated> {
        let mut chosen: Vec<(usize, &Segment)> = Vec::new();
        for (index, segment) in self.segments.iter().enumerate() {
            if !segment.applies.to_class(class) {
                continue;
            }
            if segment.applies.depends_on_power() {
                let power_w = conditions.power_w.ok_or(NotStated::Power)?;
                let doubled = chosen.iter().any(|(_, other)| {
                    other.applies.depends_on_power()
                        && other.applies.classes == segment.applies.classes
                        && (other.from, other.to) == (segment.from, segment.to)
                });
                if doubled || !segment.applies.at_power(power_w) {
                    continue;
                }
            }
            chosen.push((index, segment));
        }
        Ok(chosen)
    }

    /// The limit at `offset_hz` from the origin, with `power_w` of mean output power; none where no
    /// segment holds. The floor is applied where the reference is known.
    ///
    /// # Errors
    /// A condition that the limit needs and is not stated.
    pub fn limit_at(
        &self,
        offset_hz: f64,
        power_w: Option<f64>,
        conditions: &Conditions,
    ) -> Result<Option<LimitLevel>, NotStated> {
        let conditions = Conditions {
            power_w: power_w.or(conditions.power_w),
            ..self.with_own(conditions)
        };
        let mut found: Option<&Segment> = None;
        for segment in &self.segments {
            let (from_hz, to_hz) = segment.ends_hz(&conditions)?;
            let holds = (offset_hz > from_hz && offset_hz <= to_hz)
                || offset_hz == from_hz && (from_hz == 0.0 || from_hz == to_hz);
            if !holds {
                continue;
            }
            if segment.applies.depends_on_power()
                && !segment
                    .applies
                    .at_power(conditions.power_w.ok_or(NotStated::Power)?)
            {
                continue;
            }
            found = Some(segment);
            break;
        }
        let Some(segment) = found else {
            return Ok(None);
        };
        let level = segment.level(offset_hz, &conditions)?;
        Ok(Some(match (self.floor_dbm, conditions.reference_dbm) {
            (Some(floor_dbm), Some(reference_dbm)) if level.dbm(reference_dbm) < floor_dbm => {
                LimitLevel::Absolute { dbm: floor_dbm }
            }
            _ => level,
        }))
    }
}
