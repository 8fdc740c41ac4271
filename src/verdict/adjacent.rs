//! Power in neighbouring channels.

use super::judge::{Gathered, Measured, Ruling};
use super::reading::level_dbm;
use super::rows::{pick, room};
use crate::limits::{
    Adjacent, AdjacentRow, Applies, Combine, Corner, Detector, LimitSet, Limits, MainFilter, Mask,
    Origin, Placement, Reference, Segment, close,
};
use crate::metrics::{AdjacentChannel, ChannelFilter, adjacent_channels, channel_power_w};
use crate::units::show;

/// The mask that a set of neighbouring channels puts beyond them, read in its widest row's bandwidth.
pub(super) fn beyond_mask(adjacent: &Adjacent) -> Option<Mask> {
    let (from_hz, term) = adjacent.beyond?;
    let bw_hz = adjacent
        .rows
        .iter()
        .map(|row| row.filter.bandwidth_hz())
        .fold(0.0, f64::max);
    Some(Mask {
        reference: Reference::MeanPowerInChannel,
        origin: Origin::ChannelCenter,
        detector: Detector::Mean,
        channel_hz: adjacent.channel_hz,
        authorized_bandwidth_hz: None,
        floor_dbm: adjacent.floor_dbm,
        segments: vec![Segment {
            from: Corner::Hz(from_hz),
            to: None,
            bw_hz,
            sum_of_bw_hz: None,
            placement: Placement::Centre,
            combine: Combine::Single,
            terms: vec![term],
            applies: Applies::default(),
        }],
    })
}

fn filter_words(filter: &ChannelFilter) -> String {
    match *filter {
        ChannelFilter::Flat { bandwidth_hz } => {
            format!("{} flat", show(bandwidth_hz, "Hz", 6))
        }
        ChannelFilter::RootRaisedCosine {
            symbol_rate_hz,
            rolloff,
        } => format!(
            "root-raised cosine of {}, roll-off {rolloff}",
            show(symbol_rate_hz, "Hz", 6)
        ),
    }
}

pub(super) fn adjacent(
    set: &LimitSet,
    adjacent: &Adjacent,
    measured: &Measured<'_>,
    limits: &Limits,
    gathered: &mut Gathered,
) {
    let class = limits.class_for(set);
    let mut rows: Vec<&AdjacentRow> = adjacent
        .rows
        .iter()
        .filter(|row| {
            row.applies.to_class(class)
                && row.applies.at_power(measured.mean_w)
                && row.channel_hz.is_none_or(|width| {
                    limits.channel_hz.is_some_and(|stated| close(stated, width))
                })
        })
        .collect();
    if rows.is_empty() {
        gathered.undecided(
            Some(set),
            set.name.clone(),
            format!(
                "no row is for {} of output power and the class and channel stated",
                show(measured.mean_w, "W", 4)
            ),
        );
    }
    while let Some(first) = rows.first().copied() {
        let same = |row: &&AdjacentRow| {
            close(row.offset_hz, first.offset_hz) && row.filter == first.filter
        };
        let group: Vec<&AdjacentRow> = rows.iter().copied().filter(same).collect();
        rows.retain(|row| !same(row));
        let Some((row, why)) = pick(&group, |row| &row.applies, |row| row.limit_db, class) else {
            continue;
        };
        let main = match adjacent.reference {
            MainFilter::SameFilter => row.filter,
            MainFilter::Channel => ChannelFilter::Flat {
                bandwidth_hz: adjacent
                    .channel_hz
                    .or(limits.channel_hz)
                    .unwrap_or(row.filter.bandwidth_hz()),
            },
        };
        let name = format!("{}, channel at {}", set.name, show(row.offset_hz, "Hz", 6));
        pair(
            Some(set),
            name,
            Pair {
                offset_hz: row.offset_hz,
                filter: row.filter,
                main,
                limit_db: row.limit_db,
                floor_dbm: adjacent.floor_dbm,
                ignore_below_dbm: adjacent.ignore_below_dbm,
                why,
            },
            measured,
            gathered,
        );
    }
}

pub(super) struct Pair {
    pub offset_hz: f64,
    pub filter: ChannelFilter,
    pub main: ChannelFilter,
    pub limit_db: f64,
    pub floor_dbm: Option<f64>,
    pub ignore_below_dbm: Option<f64>,
    pub why: &'static str,
}

pub(super) fn pair(
    set: Option<&LimitSet>,
    name: String,
    pair: Pair,
    measured: &Measured<'_>,
    gathered: &mut Gathered,
) {
    let read = adjacent_channels(measured.fine, &pair.main, &[(pair.offset_hz, pair.filter)])
        .and_then(|rows| Ok((rows, channel_power_w(measured.fine, 0.0, &pair.main)?)));
    let (rows, main_w) = match read {
        Ok(read) => read,
        Err(error) => {
            gathered.undecided(set, name, error.to_string());
            return;
        }
    };
    let Some(row) = rows.first().copied() else {
        return;
    };
    let main_dbm = level_dbm(main_w);
    // An empty neighbour reads minus infinity; kept finite.
    let finite = |ratio_db: f64| level_dbm(0.0).max(main_dbm + ratio_db) - main_dbm;
    let row = AdjacentChannel {
        lower_db: finite(row.lower_db),
        upper_db: finite(row.upper_db),
        ..row
    };
    gathered.acpr.push(row);
    let (side, level_db) = if row.lower_db > row.upper_db {
        ("lower", row.lower_db)
    } else {
        ("upper", row.upper_db)
    };
    let excuses = [
        (pair.floor_dbm, "nothing tighter is required"),
        (pair.ignore_below_dbm, "the ratio counts only above it"),
    ];
    let mut limit_dbm = main_dbm + pair.limit_db;
    let mut excuse = String::new();
    for (dbm, words) in excuses {
        if let Some(dbm) = dbm
            && dbm > limit_dbm
        {
            limit_dbm = dbm;
            excuse = format!(", raised to {dbm:.2} dBm ({words})");
        }
    }
    let margin_db = limit_dbm - (main_dbm + level_db);
    let reason = format!(
        "{side} channel at {} holds {level_db:.2} dB ({:.2} dBm, {}) against {main_dbm:.2} dBm in the wanted one ({}), limit {:.2} dB{excuse}: {}{}",
        show(pair.offset_hz, "Hz", 6),
        main_dbm + level_db,
        filter_words(&pair.filter),
        filter_words(&pair.main),
        pair.limit_db,
        room(margin_db),
        pair.why,
    );
    let ruling = Ruling {
        margin_db,
        found: format!("{level_db:.2} dB"),
        allowed: format!("{:.2} dB", limit_dbm - main_dbm),
        reason,
    };
    gathered.decided(set, name, ruling);
}
