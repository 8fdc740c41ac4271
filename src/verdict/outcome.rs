//! What a verdict is made of.

use serde::Serialize;

use crate::limits::Obtained;

/// Whether a limit is met.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Outcome {
    /// Met.
    Within,
    /// Not met.
    Outside,
    /// Not to be decided from what was measured.
    Undecided,
}

impl Outcome {
    /// Met from a margin of 0 dB upwards; a billionth of a dB forgives rounding.
    pub fn of_margin(margin_db: f64) -> Self {
        if margin_db.is_nan() {
            Self::Undecided
        } else if margin_db >= -1e-9 {
            Self::Within
        } else {
            Self::Outside
        }
    }
}

/// One limit held against one number.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Check {
    /// Which limit, shortly.
    pub name: String,
    /// Whether it is met.
    pub outcome: Outcome,
    /// Distance to the limit, dB; positive is within.
    pub margin_db: Option<f64>,
    /// The reading with its unit; none where nothing was read.
    pub found: Option<String>,
    /// The limit with its unit.
    pub allowed: Option<String>,
    /// What was read where, and what is allowed there.
    pub reason: String,
    /// The set that holds the limit; none for the study's own.
    pub set: Option<String>,
    /// How the set's numbers were obtained.
    pub obtained: Option<Obtained>,
}

/// All checks, and what they come to.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Verdict {
    /// Outside if any check is, else undecided if any check is, else within.
    pub outcome: Outcome,
    /// In the order of the study.
    pub checks: Vec<Check>,
}

impl Verdict {
    /// The verdict that `checks` come to. Without any check it is undecided, and says so.
    pub fn of(mut checks: Vec<Check>) -> Self {
        if checks.is_empty() {
            checks.push(Check {
                name: "limits".to_owned(),
                outcome: Outcome::Undecided,
                margin_db: None,
                found: None,
                allowed: None,
                reason: "no limit was named: add sets, evm_percent or acpr rows to [limits]"
                    .to_owned(),
                set: None,
                obtained: None,
            });
        }
        let any = |outcome| checks.iter().any(|check| check.outcome == outcome);
        let outcome = if any(Outcome::Outside) {
            Outcome::Outside
        } else if any(Outcome::Undecided) {
            Outcome::Undecided
        } else {
            Outcome::Within
        };
        Self { outcome, checks }
    }

    /// The check with the smallest margin.
    pub fn tightest(&self) -> Option<&Check> {
        self.checks
            .iter()
            .filter(|check| check.margin_db.is_some())
            .min_by(|a, b| {
                a.margin_db
                    .partial_cmp(&b.margin_db)
                    .unwrap_or(std::cmp::Ordering::Equal)
            })
    }
}

/// Which side of the carrier.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Side {
    /// Below it.
    Lower,
    /// Above it.
    Upper,
}

impl Side {
    /// -1 below the carrier, +1 above it.
    pub fn sign(self) -> f64 {
        match self {
            Self::Lower => -1.0,
            Self::Upper => 1.0,
        }
    }

    /// The word in tables and reasons.
    pub fn word(self) -> &'static str {
        match self {
            Self::Lower => "lower",
            Self::Upper => "upper",
        }
    }
}

/// What a level is counted in.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize)]
pub enum Unit {
    /// Against the reference.
    #[serde(rename = "dB")]
    Decibel,
    /// Absolute.
    #[serde(rename = "dBm")]
    Dbm,
}

impl Unit {
    /// As written behind a number.
    pub fn word(self) -> &'static str {
        match self {
            Self::Decibel => "dB",
            Self::Dbm => "dBm",
        }
    }
}

/// The tightest point of one mask segment on one side. Offsets are distances from the carrier.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct MaskMargin {
    /// The set.
    pub set: String,
    /// Start of the segment, Hz from the carrier.
    pub from_hz: f64,
    /// End of what was judged, Hz from the carrier: the segment's end or the sampled edge.
    pub to_hz: f64,
    /// Which side of the carrier.
    pub side: Side,
    /// Distance to the limit there, dB; positive is within.
    pub margin_db: f64,
    /// Where the margin is smallest, Hz from the carrier.
    pub worst_hz: f64,
    /// The reading there.
    pub level_db: f64,
    /// The limit there.
    pub limit_db: f64,
    /// What both are counted in.
    pub unit: Unit,
    /// The reference that relative levels count from, dBm.
    pub reference_dbm: Option<f64>,
    /// The measuring bandwidth, Hz.
    pub bandwidth_hz: f64,
}
