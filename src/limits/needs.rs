//! What the named sets need to be told, held against what was stated.

use super::mask::Corner;
use super::request::Limits;
use super::rows::{ErrorRow, MainFilter};
use super::set::{Kind, LimitSet};
use super::terms::Origin;
use crate::input::nearest;
use crate::units::show;

/// A condition that a named set needs and the request does not state, or states wrongly.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("{key} must be {allowed}{}", .nearest.as_ref().map(|near| format!("; did you mean \"{near}\"?")).unwrap_or_default())]
pub struct Unmet {
    /// The key of the study's `[limits]`.
    pub key: &'static str,
    /// What it must be, and for which set.
    pub allowed: String,
    /// What was probably meant.
    pub nearest: Option<String>,
}

/// Letters and digits only, lower case: `64-QAM` and `64QAM` are one modulation.
fn plain(text: &str) -> String {
    text.chars()
        .filter(char::is_ascii_alphanumeric)
        .map(|c| c.to_ascii_lowercase())
        .collect()
}

/// True where `row` is what `wanted` names: the same word, or its start.
pub(crate) fn same_modulation(row: &str, wanted: &str) -> bool {
    row.is_empty() || plain(row).starts_with(&plain(wanted))
}

/// Equal but for rounding in the text.
pub(crate) fn close(a: f64, b: f64) -> bool {
    (a - b).abs() <= 1e-9 * a.abs().max(b.abs())
}

impl Limits {
    /// Holds the conditions stated against those the sets need.
    ///
    /// # Errors
    /// The first that is missing or contradicts a set.
    pub fn complete(&self) -> Result<(), Unmet> {
        let unmet = |key, allowed| {
            Err(Unmet {
                key,
                allowed,
                nearest: None,
            })
        };
        for set in &self.sets {
            let name = &set.name;
            match &set.kind {
                Kind::Mask(mask) => {
                    let fractions = mask
                        .segments
                        .iter()
                        .any(|segment| matches!(segment.from, Corner::Fraction(_)));
                    let authorized = mask
                        .authorized_bandwidth_hz
                        .or(self.authorized_bandwidth_hz);
                    if fractions && authorized.is_none() {
                        return unmet(
                            "authorized_bandwidth",
                            format!(
                                "the authorized bandwidth, such as \"20 kHz\": the offsets of {name} are fractions of it"
                            ),
                        );
                    }
                    if mask.origin == Origin::ChannelEdge {
                        match (mask.channel_hz, self.channel_hz) {
                            (None, None) => {
                                return unmet(
                                    "channel",
                                    format!(
                                        "the channel width, such as \"5 MHz\": the offsets of {name} count from its edge"
                                    ),
                                );
                            }
                            (Some(own), Some(stated)) if !close(own, stated) => {
                                return unmet(
                                    "channel",
                                    format!("{}, for which {name} is made", show(own, "Hz", 6)),
                                );
                            }
                            _ => {}
                        }
                    }
                }
                Kind::Adjacent(adjacent) => {
                    let mut widths: Vec<f64> = Vec::new();
                    for width in adjacent.rows.iter().filter_map(|row| row.channel_hz) {
                        if !widths.iter().any(|other| close(*other, width)) {
                            widths.push(width);
                        }
                    }
                    let listed: Vec<String> = widths.iter().map(|hz| show(*hz, "Hz", 6)).collect();
                    let fits = self
                        .channel_hz
                        .is_some_and(|stated| widths.iter().any(|width| close(*width, stated)));
                    if !widths.is_empty() && !fits {
                        return unmet(
                            "channel",
                            format!("one of the channel widths of {name}: {}", listed.join(", ")),
                        );
                    }
                    if adjacent.reference == MainFilter::Channel
                        && adjacent.channel_hz.or(self.channel_hz).is_none()
                    {
                        return unmet(
                            "channel",
                            format!(
                                "the channel width: the reference of {name} is the power in it"
                            ),
                        );
                    }
                }
                Kind::Modulation(modulation) => {
                    let names = |wanted: fn(&ErrorRow) -> &str| {
                        let mut words: Vec<String> = Vec::new();
                        for row in &modulation.rows {
                            let word = format!("\"{}\"", wanted(row));
                            if !words.contains(&word) {
                                words.push(word);
                            }
                        }
                        words.join(", ")
                    };
                    if let Some(wanted) = &self.modulation
                        && !modulation
                            .rows
                            .iter()
                            .any(|row| same_modulation(&row.modulation, wanted))
                    {
                        return unmet(
                            "modulation",
                            format!("a modulation of {name}: {}", names(|row| &row.modulation)),
                        );
                    }
                    let coded = modulation.rows.iter().any(|row| row.coding.is_some());
                    if let Some(coding) = &self.coding
                        && coded
                        && !modulation.rows.iter().any(|row| {
                            self.modulation
                                .as_ref()
                                .is_none_or(|wanted| same_modulation(&row.modulation, wanted))
                                && row.coding.as_ref() == Some(coding)
                        })
                    {
                        return unmet(
                            "coding",
                            format!(
                                "a code rate of {name} for this modulation: {}",
                                names(|row| row.coding.as_deref().unwrap_or_default())
                            ),
                        );
                    }
                }
                Kind::Spurious(_) | Kind::Signal(_) => {}
            }
        }
        let known: Vec<&str> = self.sets.iter().flat_map(LimitSet::classes).collect();
        for word in &self.classes {
            if !known.contains(&word.as_str()) {
                let allowed = if known.is_empty() {
                    "nothing: none of the named sets tells classes of equipment apart".to_owned()
                } else {
                    let words: Vec<String> =
                        known.iter().map(|known| format!("\"{known}\"")).collect();
                    format!("a class of the named sets: {}", words.join(", "))
                };
                return Err(Unmet {
                    key: "class",
                    allowed,
                    nearest: nearest(word, &known).map(str::to_owned),
                });
            }
        }
        Ok(())
    }
}
