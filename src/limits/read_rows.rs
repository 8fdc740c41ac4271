//! Rows in a file: neighbouring channels, error vectors, spurious emissions, facts about signals.

use super::mask::Corner;
use super::read_term::term;
use super::rows::{
    Adjacent, AdjacentRow, Applies, ErrorRow, MainFilter, Modulation, SignalFormat, Spurious,
    SpuriousRow, Statistic,
};
use super::terms::Reference;
use crate::input::{Problem, Range, Section};
use crate::metrics::ChannelFilter;
use crate::units::{Dimension, from_db, show};

const HERTZ: Dimension = Dimension::Frequency;

/// A neighbour's limit stands below the wanted channel: a positive one is a slip of the sign.
const BELOW_CHANNEL: Range = Range::Between(-300.0, 0.0);

/// Which equipment and powers a row is for.
pub(super) fn applies(row: &Section<'_>) -> Result<Applies, Problem> {
    let min_power_w = row.maybe_quantity("min_power_w", Dimension::Power, Range::NotNegative)?;
    let max_power_w = row.maybe_quantity("max_power_w", Dimension::Power, Range::Positive)?;
    if let (Some(min), Some(max)) = (min_power_w, max_power_w)
        && max <= min
    {
        return Err(row.problem(
            "max_power_w",
            format!("more than min_power_w, {}", show(min, "W", 6)),
        ));
    }
    let classes =
        match row.texts("class") {
            Ok(words) => words,
            Err(_) => vec![row.text("class").map_err(|_| {
                row.problem("class", "a word in quotes, or a list of words in quotes")
            })?],
        };
    Ok(Applies {
        words: row.maybe_text("applies")?.map(str::to_owned),
        min_power_w,
        max_power_w,
        classes: classes.into_iter().map(str::to_owned).collect(),
    })
}

/// The filter that a set or row states: flat over `flat_key`, or root-raised cosine.
pub(super) fn rrc(
    section: &Section<'_>,
    symbol_rate_key: &'static str,
    rolloff_key: &'static str,
) -> Result<Option<ChannelFilter>, Problem> {
    let symbol_rate_hz = section.maybe_quantity(symbol_rate_key, HERTZ, Range::Positive)?;
    let rolloff = section.maybe_quantity(rolloff_key, Dimension::Ratio, Range::Within(0.0, 1.0))?;
    match (symbol_rate_hz, rolloff) {
        (Some(symbol_rate_hz), Some(rolloff)) => Ok(Some(ChannelFilter::RootRaisedCosine {
            symbol_rate_hz,
            rolloff,
        })),
        (Some(_), None) => Err(section.problem(rolloff_key, "the roll-off, 0 to 1")),
        (None, Some(_)) => Err(section.problem(symbol_rate_key, "the symbol rate, Hz")),
        (None, None) => Ok(None),
    }
}

/// A number of percent: `10`, or `"10 %"`.
pub(super) fn percent(section: &Section<'_>, key: &'static str) -> Result<Option<f64>, Problem> {
    let value = section.maybe_quantity(key, Dimension::Ratio, Range::Positive)?;
    let with_sign = matches!(section.maybe_text(key), Ok(Some(text)) if text.contains('%'));
    Ok(value.map(|value| if with_sign { 100.0 * value } else { value }))
}

/// At least one row, each made by `read`.
fn rows<T>(
    section: &Section<'_>,
    key: &'static str,
    read: impl Fn(&Section<'_>) -> Result<T, Problem>,
) -> Result<Vec<T>, Problem> {
    let tables = section.sections(key)?;
    if tables.is_empty() {
        return Err(section.problem(key, format!("one or more tables [[set.NAME.{key}]]")));
    }
    tables
        .iter()
        .map(|table| {
            let row = read(table)?;
            table.finish()?;
            Ok(row)
        })
        .collect()
}

pub(super) fn adjacent(section: &Section<'_>) -> Result<Adjacent, Problem> {
    let reference = section
        .maybe_choice(
            "reference",
            &[
                ("mean_power_in_channel", MainFilter::Channel),
                ("mean_power_through_same_filter", MainFilter::SameFilter),
            ],
        )?
        .unwrap_or(MainFilter::SameFilter);
    section.maybe_choice("offset_origin", &[("channel_center", ())])?;
    let shaped = match section.maybe_choice("filter", &[("rrc", true), ("flat", false)])? {
        Some(true) => match rrc(section, "filter_symbol_rate_hz", "filter_rolloff")? {
            Some(filter) => Some(filter),
            None => {
                return Err(section.problem("filter_symbol_rate_hz", "the symbol rate, Hz"));
            }
        },
        _ => None,
    };
    let beyond_hz = section.maybe_quantity("beyond_hz", HERTZ, Range::Positive)?;
    let beyond_term = section.maybe_section("beyond_term")?;
    let beyond = match (beyond_hz, beyond_term) {
        (Some(hz), Some(table)) => Some((
            hz,
            term(&table, Corner::Hz(hz), Reference::MeanPowerInChannel)?,
        )),
        (None, None) => None,
        (Some(_), None) => return Err(section.problem("beyond_term", "the limit beyond beyond_hz")),
        (None, Some(_)) => {
            return Err(section.problem("beyond_hz", "the offset beyond which beyond_term holds"));
        }
    };
    let neighbours = rows(section, "channel", |row| {
        let filter = match shaped {
            Some(filter) => filter,
            None => ChannelFilter::Flat {
                bandwidth_hz: row.quantity("bw_hz", HERTZ, Range::Positive)?,
            },
        };
        Ok(AdjacentRow {
            offset_hz: row.quantity("offset_hz", HERTZ, Range::Positive)?,
            filter,
            limit_db: row.quantity("limit_db", Dimension::Decibel, BELOW_CHANNEL)?,
            channel_hz: row.maybe_quantity("channel_hz", HERTZ, Range::Positive)?,
            applies: applies(row)?,
        })
    })?;
    Ok(Adjacent {
        reference,
        channel_hz: section.maybe_quantity("channel_hz", HERTZ, Range::Positive)?,
        floor_dbm: section.maybe_quantity("floor_dbm", Dimension::Level, Range::Any)?,
        ignore_below_dbm: section.maybe_quantity(
            "ignore_if_adjacent_below_dbm",
            Dimension::Level,
            Range::Any,
        )?,
        beyond,
        rows: neighbours,
    })
}

pub(super) fn modulation(section: &Section<'_>) -> Result<Modulation, Problem> {
    let reference = section
        .maybe_text("reference")?
        .unwrap_or("rms of the reference");
    let rows = rows(section, "item", |row| {
        let statistic = row.maybe_choice(
            "statistic",
            &[
                ("rms", Statistic::Rms),
                ("peak", Statistic::Peak),
                ("p95", Statistic::P95),
                ("p99", Statistic::P99),
            ],
        )?;
        let percent = percent(row, "limit_percent")?;
        let in_db = row.maybe_quantity("limit_db", Dimension::Decibel, Range::Any)?;
        let limit_percent = match (percent, in_db) {
            (Some(percent), None) => percent,
            // 20 log10(error / reference), as the documents print it.
            (None, Some(db)) => 100.0 * from_db(db).sqrt(),
            (Some(_), Some(_)) => {
                return Err(row.problem("limit_db", "limit_percent or limit_db, not both"));
            }
            (None, None) => {
                return Err(row.problem("limit_percent", "the limit in percent (or limit_db)"));
            }
        };
        Ok(ErrorRow {
            modulation: row.maybe_text("modulation")?.unwrap_or_default().to_owned(),
            coding: row.maybe_text("coding")?.map(str::to_owned),
            rate_mbps: row.maybe_quantity("rate_mbps", Dimension::Ratio, Range::Positive)?,
            statistic: statistic.unwrap_or(Statistic::Rms),
            limit_percent,
            applies: applies(row)?,
        })
    })?;
    Ok(Modulation {
        reference: reference.to_owned(),
        rows,
    })
}

pub(super) fn spurious(section: &Section<'_>) -> Result<Spurious, Problem> {
    section.maybe_choice("reference", &[("mean_power_of_fundamental", ())])?;
    Ok(Spurious {
        rows: rows(section, "item", |row| {
            Ok(SpuriousRow {
                limit_db: row.quantity("limit_db", Dimension::Decibel, Range::Any)?,
                cap_w: row.maybe_quantity("cap_w", Dimension::Power, Range::Positive)?,
                floor_w: row.maybe_quantity("floor_w", Dimension::Power, Range::Positive)?,
                applies: applies(row)?,
            })
        })?,
    })
}

pub(super) fn signal(section: &Section<'_>) -> Result<SignalFormat, Problem> {
    section.maybe_choice("filter", &[("rrc", ())])?;
    Ok(SignalFormat {
        modulation: section.text("modulation")?.to_owned(),
        symbol_rate_hz: section.quantity("symbol_rate_hz", HERTZ, Range::Positive)?,
        rolloff: section.maybe_quantity("rolloff", Dimension::Ratio, Range::Within(0.0, 1.0))?,
        channel_hz: section.maybe_quantity("channel_hz", HERTZ, Range::Positive)?,
        residual_carrier_max_percent: percent(section, "residual_carrier_max_percent")?,
    })
}
