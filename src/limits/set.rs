//! One named set of limits, and how far its numbers can be trusted.

use serde::Serialize;

use super::mask::Mask;
use super::rows::{Adjacent, Modulation, SignalFormat, Spurious};

/// How the numbers of a set were obtained.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Obtained {
    /// Read in the text of the standard or regulation.
    Read,
    /// Read in something that repeats the numbers.
    SecondHand,
    /// Recalled; no text was found.
    Memory,
    /// Stated by the user.
    Own,
}

impl Obtained {
    /// The word in files and listings.
    pub fn word(self) -> &'static str {
        match self {
            Self::Read => "read",
            Self::SecondHand => "second-hand",
            Self::Memory => "memory",
            Self::Own => "own",
        }
    }
}

/// How sure whoever collected the numbers is of them.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Confidence {
    /// No doubt known.
    High,
    /// A part is doubtful.
    Medium,
    /// Not to be relied on.
    Low,
}

impl Confidence {
    /// The word in files and listings.
    pub fn word(self) -> &'static str {
        match self {
            Self::High => "high",
            Self::Medium => "medium",
            Self::Low => "low",
        }
    }
}

/// Where the numbers of a set come from.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Provenance {
    /// The standard or regulation; empty where the user named none.
    pub source: String,
    /// The clause in it.
    pub clause: String,
    /// Which edition was read.
    pub edition: String,
    /// How the numbers were obtained.
    pub obtained: Obtained,
    /// What kind of text was read.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub source_kind: Option<String>,
    /// How sure they are.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub confidence: Option<Confidence>,
    /// Parts that were recalled although the rest was read.
    pub memory_parts: Vec<String>,
    /// What was held against another text.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub cross_checked: Option<String>,
    /// Remarks.
    pub notes: Vec<String>,
}

impl Provenance {
    /// What a verdict that uses the set must say about it, where its numbers were not read in the
    /// text itself.
    pub fn caution(&self) -> Option<String> {
        let document = format!("check {} {} before relying on it", self.source, self.clause);
        let doubt = match self.confidence {
            Some(Confidence::Medium) => ", of medium confidence",
            Some(Confidence::Low) => ", of low confidence",
            _ => "",
        };
        match self.obtained {
            Obtained::Own => None,
            Obtained::Memory => Some(format!("numbers recalled from memory{doubt}: {document}")),
            Obtained::SecondHand => Some(format!("numbers read second-hand{doubt}: {document}")),
            Obtained::Read if self.memory_parts.is_empty() => None,
            Obtained::Read => Some(format!(
                "read in the document but for {}, recalled from memory",
                self.memory_parts.join(", ")
            )),
        }
    }
}

/// What a set limits.
#[derive(Debug, Clone, PartialEq, Serialize)]
#[serde(rename_all = "lowercase", tag = "kind")]
pub enum Kind {
    /// Levels over the offset from the carrier.
    Mask(Mask),
    /// Power in neighbouring channels.
    Adjacent(Adjacent),
    /// Error vector magnitude.
    Modulation(Modulation),
    /// Emissions far from the carrier, such as harmonics.
    Spurious(Spurious),
    /// Facts about the signal; nothing to judge.
    Signal(SignalFormat),
}

impl Kind {
    /// The word in files and listings.
    pub fn word(&self) -> &'static str {
        match self {
            Self::Mask(_) => "mask",
            Self::Adjacent(_) => "adjacent",
            Self::Modulation(_) => "modulation",
            Self::Spurious(_) => "spurious",
            Self::Signal(_) => "signal",
        }
    }
}

/// A point worked out from the printed formula, which the set must reproduce.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct CheckPoint {
    /// Distance from the origin of offsets, Hz.
    pub offset_hz: f64,
    /// Output power, W, where the limit depends on it.
    pub power_w: Option<f64>,
    /// Authorized bandwidth, Hz, where the offsets depend on it.
    pub authorized_bandwidth_hz: Option<f64>,
    /// The limit, dB against the reference, to the printed digits.
    pub limit_db: f64,
}

/// One named set of limits.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct LimitSet {
    /// The name in studies and on the command line.
    pub name: String,
    /// What it is, in words.
    pub title: String,
    /// Where its numbers come from.
    pub provenance: Provenance,
    /// What it limits.
    #[serde(flatten)]
    pub kind: Kind,
    /// Points that the set must reproduce; held while the file is read.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub checks: Vec<CheckPoint>,
}

impl LimitSet {
    /// The words for equipment classes that its rows use, each once.
    pub fn classes(&self) -> Vec<&str> {
        let rows: Vec<&Vec<String>> = match &self.kind {
            Kind::Adjacent(adjacent) => adjacent.rows.iter().map(|r| &r.applies.classes).collect(),
            Kind::Modulation(modulation) => {
                modulation.rows.iter().map(|r| &r.applies.classes).collect()
            }
            Kind::Spurious(spurious) => spurious.rows.iter().map(|r| &r.applies.classes).collect(),
            Kind::Mask(mask) => mask.segments.iter().map(|s| &s.applies.classes).collect(),
            Kind::Signal(_) => Vec::new(),
        };
        let mut words: Vec<&str> = Vec::new();
        for word in rows.into_iter().flatten() {
            if !words.contains(&word.as_str()) {
                words.push(word);
            }
        }
        words
    }
}
