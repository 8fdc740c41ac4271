//! Sets as tables of words.

use serde::Serialize;

use super::mask::{Conditions, LimitLevel, Mask, NotStated, Segment};
use super::rows::MainFilter;
use super::set::{Kind, LimitSet};
use crate::metrics::ChannelFilter;
use crate::units::show;

/// The levels at both ends of a segment; the upper is the lower's where it is open-ended.
#[derive(Debug, Serialize)]
pub struct Evaluated {
    from_hz: f64,
    to_hz: Option<f64>,
    at_from: Level,
    at_to: Level,
}

/// A level in dB against the reference, in dBm, or both where both must be met.
#[derive(Debug, Serialize)]
pub struct Level {
    #[serde(skip_serializing_if = "Option::is_none")]
    db: Option<f64>,
    #[serde(skip_serializing_if = "Option::is_none")]
    dbm: Option<f64>,
}

impl Level {
    fn words(&self) -> String {
        let db = self.db.map(|db| format!("{db:.2} dB"));
        let dbm = self.dbm.map(|dbm| format!("{dbm:.2} dBm"));
        let both: Vec<String> = db.into_iter().chain(dbm).collect();
        both.join(" and ")
    }
}

impl From<LimitLevel> for Level {
    fn from(level: LimitLevel) -> Self {
        let (db, dbm) = match level {
            LimitLevel::Relative { db } => (Some(db), None),
            LimitLevel::Absolute { dbm } => (None, Some(dbm)),
            LimitLevel::Both { db, dbm } => (Some(db), Some(dbm)),
        };
        Self { db, dbm }
    }
}

/// The levels of `segment` at its ends.
///
/// # Errors
/// A condition that they need and is not stated.
pub fn evaluate(
    mask: &Mask,
    segment: &Segment,
    conditions: &Conditions,
) -> Result<Evaluated, NotStated> {
    let conditions = mask.with_own(conditions);
    let (from_hz, to_hz) = segment.ends_hz(&conditions)?;
    let end_hz = if to_hz.is_finite() { to_hz } else { from_hz };
    Ok(Evaluated {
        from_hz,
        to_hz: to_hz.is_finite().then_some(to_hz),
        at_from: segment.level(from_hz, &conditions)?.into(),
        at_to: segment.level(end_hz, &conditions)?.into(),
    })
}

/// The set's rows, the headings first.
pub fn table_rows(
    set: &LimitSet,
    class: Option<&str>,
    conditions: &Conditions,
) -> Vec<Vec<String>> {
    let head = |words: &[&str]| {
        vec![
            words
                .iter()
                .map(|word| (*word).to_owned())
                .collect::<Vec<_>>(),
        ]
    };
    match &set.kind {
        Kind::Mask(mask) => {
            let mut rows = head(&["offset", "read in", "limit", "at the ends", "for"]);
            for segment in mask.segments.iter().filter(|s| s.applies.to_class(class)) {
                let bandwidth = match segment.bw_hz {
                    0.0 => "not fixed".to_owned(),
                    hz => match segment.sum_of_bw_hz {
                        Some(narrow_hz) => format!(
                            "{} (sum of {})",
                            show(hz, "Hz", 4),
                            show(narrow_hz, "Hz", 4)
                        ),
                        None => show(hz, "Hz", 4),
                    },
                };
                let ends = match evaluate(mask, segment, conditions) {
                    Ok(ends) => {
                        let (start, end) = (ends.at_from.words(), ends.at_to.words());
                        if start == end {
                            start
                        } else {
                            format!("{start} to {end}")
                        }
                    }
                    Err(NotStated::Power) => "with --power".to_owned(),
                    Err(NotStated::AuthorizedBandwidth) => "with --authorized-bandwidth".to_owned(),
                    Err(NotStated::Channel) => "with --channel".to_owned(),
                };
                rows.push(vec![
                    segment.extent_words(),
                    bandwidth,
                    segment.limit_words(),
                    ends,
                    segment.applies.to_string(),
                ]);
            }
            rows
        }
        Kind::Adjacent(adjacent) => {
            let mut rows = head(&[
                "channel at",
                "read through",
                "limit",
                "channel width",
                "for",
            ]);
            for row in adjacent
                .rows
                .iter()
                .filter(|row| row.applies.to_class(class))
            {
                rows.push(vec![
                    show(row.offset_hz, "Hz", 6),
                    filter(&row.filter),
                    format!("{} dB", row.limit_db),
                    row.channel_hz
                        .or(adjacent.channel_hz)
                        .map(|hz| show(hz, "Hz", 6))
                        .unwrap_or_default(),
                    row.applies.to_string(),
                ]);
            }
            if let Some((from_hz, term)) = &adjacent.beyond {
                rows.push(vec![
                    format!("{} and beyond", show(*from_hz, "Hz", 6)),
                    "as above".to_owned(),
                    term.to_string(),
                ]);
            }
            let reference = match adjacent.reference {
                MainFilter::Channel => "the mean power in the whole channel",
                MainFilter::SameFilter => "the mean power through the same filter",
            };
            rows.push(vec![format!("against {reference}")]);
            if let Some(dbm) = adjacent.floor_dbm {
                rows.push(vec![format!("nothing tighter than {dbm} dBm is required")]);
            }
            if let Some(dbm) = adjacent.ignore_below_dbm {
                rows.push(vec![format!(
                    "counts only above {dbm} dBm in the neighbour"
                )]);
            }
            rows
        }
        Kind::Modulation(modulation) => {
            let mut rows = head(&["modulation", "code rate", "statistic", "limit", "for"]);
            for row in modulation
                .rows
                .iter()
                .filter(|row| row.applies.to_class(class))
            {
                rows.push(vec![
                    row.modulation.clone(),
                    row.coding.clone().unwrap_or_default(),
                    row.statistic.word().to_owned(),
                    format!("{:.2} %", row.limit_percent),
                    row.applies.to_string(),
                ]);
            }
            rows.push(vec![format!("against {}", modulation.reference)]);
            rows
        }
        Kind::Spurious(spurious) => {
            let mut rows = head(&["limit", "at most", "no lower than", "for"]);
            let watt = |power_w: Option<f64>| power_w.map(|w| show(w, "W", 4)).unwrap_or_default();
            for row in spurious
                .rows
                .iter()
                .filter(|row| row.applies.to_class(class))
            {
                rows.push(vec![
                    format!("{} dB", row.limit_db),
                    watt(row.cap_w),
                    watt(row.floor_w),
                    row.applies.to_string(),
                ]);
            }
            rows.push(vec!["against the mean power of the fundamental".to_owned()]);
            rows
        }
        Kind::Signal(signal) => {
            let mut rows = head(&["modulation", "symbol rate", "roll-off", "channel width"]);
            rows.push(vec![
                signal.modulation.clone(),
                show(signal.symbol_rate_hz, "Hz", 9),
                signal
                    .rolloff
                    .map(|rolloff| rolloff.to_string())
                    .unwrap_or_default(),
                signal
                    .channel_hz
                    .map(|hz| show(hz, "Hz", 6))
                    .unwrap_or_default(),
            ]);
            rows
        }
    }
}

fn filter(filter: &ChannelFilter) -> String {
    match *filter {
        ChannelFilter::Flat { bandwidth_hz } => format!("{} flat", show(bandwidth_hz, "Hz", 6)),
        ChannelFilter::RootRaisedCosine {
            symbol_rate_hz,
            rolloff,
        } => format!("RRC {}, {rolloff}", show(symbol_rate_hz, "Hz", 6)),
    }
}
