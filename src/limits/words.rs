//! Limits in words, for tables.

use std::fmt;

use super::mask::{Corner, Segment};
use super::rows::Applies;
use super::terms::{Combine, Term};
use crate::units::show;

/// Frequencies to six digits.
fn hertz(hz: f64) -> String {
    show(hz, "Hz", 6)
}

/// A number to at most three decimals, without trailing zeros.
fn short(number: f64) -> String {
    let text = format!("{number:.3}");
    let text = text.trim_end_matches('0').trim_end_matches('.');
    if text == "-0" { "0" } else { text }.to_owned()
}

/// As a formula over the offset f and the output power P in W.
impl fmt::Display for Term {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::Const { db } => write!(f, "{} dB", short(db)),
            Self::Linear {
                at_hz,
                at_db,
                slope_db_per_hz,
            } => {
                let (unit, hz) = if slope_db_per_hz.abs() < 1e-4 {
                    ("MHz", 1e6)
                } else {
                    ("kHz", 1e3)
                };
                write!(
                    f,
                    "{} dB at {} and {} dB per {unit}",
                    short(at_db),
                    hertz(at_hz),
                    short(slope_db_per_hz * hz)
                )
            }
            Self::Log { k_db, f0_hz } => {
                write!(f, "{} log10(f / {}) dB", short(-k_db), hertz(f0_hz))
            }
            Self::Power { c_db } => write!(f, "-({} + 10 log10 P) dB", short(c_db)),
            Self::Absolute { dbm } => write!(f, "{} dBm", short(dbm)),
        }
    }
}

impl fmt::Display for Corner {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::Hz(hz) => f.write_str(&hertz(hz)),
            Self::Fraction(fraction) => write!(f, "{} AB", short(fraction)),
        }
    }
}

impl Segment {
    /// Its terms in one phrase.
    pub fn limit_words(&self) -> String {
        let terms: Vec<String> = self.terms.iter().map(Term::to_string).collect();
        let list = terms.join("; ");
        match self.combine {
            Combine::Single => list,
            Combine::MostLenient => format!("highest of {list}"),
            Combine::Strictest => format!("lowest of {list}"),
            Combine::Both => format!("each of {list}"),
        }
    }

    /// Its ends in one phrase.
    pub fn extent_words(&self) -> String {
        match self.to {
            Some(to) if to == self.from => format!("at {to}"),
            Some(to) => format!("{} to {to}", self.from),
            None => format!("{} and beyond", self.from),
        }
    }
}

/// `2 W to 5 W, class = mobile (words of the document)`; empty where it is for all.
impl fmt::Display for Applies {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let watt = |power_w: f64| show(power_w, "W", 4);
        let mut parts = Vec::new();
        match (self.min_power_w, self.max_power_w) {
            (Some(min), Some(max)) => parts.push(format!("{} to {}", watt(min), watt(max))),
            (Some(min), None) => parts.push(format!("{} and more", watt(min))),
            (None, Some(max)) => parts.push(format!("up to {}", watt(max))),
            (None, None) => {}
        }
        if !self.classes.is_empty() {
            parts.push(format!("class = {}", self.classes.join(" or ")));
        }
        f.write_str(&parts.join(", "))?;
        match &self.words {
            Some(words) if parts.is_empty() => f.write_str(words),
            Some(words) => write!(f, " ({words})"),
            None => Ok(()),
        }
    }
}
