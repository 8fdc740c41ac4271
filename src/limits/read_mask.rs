//! Masks in a file: segments or points.

use super::consistent::overlap;
use super::mask::{Corner, Mask, Segment};
use super::read_rows::applies;
use super::read_term::term;
use super::rows::Applies;
use super::terms::{Combine, Detector, Origin, Placement, Reference, Term};
use crate::input::{Problem, Range, Section};
use crate::units::{Dimension, show};

const REFERENCES: [(&str, Reference); 9] = [
    ("output_power", Reference::OutputPower),
    (
        "unmodulated_carrier_power",
        Reference::UnmodulatedCarrierPower,
    ),
    ("mean_power", Reference::MeanPower),
    ("mean_power_in_channel", Reference::MeanPowerInChannel),
    (
        "peak_of_highest_emission_in_authorized_bandwidth",
        Reference::PeakOfHighestEmissionInAuthorizedBandwidth,
    ),
    ("peak_psd_in_channel", Reference::PeakPsdInChannel),
    (
        "peak_average_psd_within_1mhz_of_carrier",
        Reference::PeakAveragePsdWithin1MhzOfCarrier,
    ),
    (
        "power_in_30khz_on_carrier",
        Reference::PowerIn30KhzOnCarrier,
    ),
    ("absolute_dbm", Reference::AbsoluteDbm),
];

const ORIGINS: [(&str, Origin); 5] = [
    ("carrier", Origin::Carrier),
    ("assigned_frequency", Origin::AssignedFrequency),
    ("channel_center", Origin::ChannelCenter),
    (
        "center_of_authorized_bandwidth",
        Origin::CenterOfAuthorizedBandwidth,
    ),
    ("channel_edge", Origin::ChannelEdge),
];

const PLACEMENTS: [(&str, Placement); 2] =
    [("centre", Placement::Centre), ("inside", Placement::Inside)];

const HERTZ: Dimension = Dimension::Frequency;

pub(super) fn mask(section: &Section<'_>) -> Result<Mask, Problem> {
    let Some(reference) = section.maybe_choice("reference", &REFERENCES)? else {
        let words: Vec<String> = REFERENCES.iter().map(|(w, _)| format!("\"{w}\"")).collect();
        return Err(section.problem("reference", words.join(", ")));
    };
    let origin = section
        .maybe_choice("offset_origin", &ORIGINS)?
        .unwrap_or(Origin::Carrier);
    let detector = section
        .maybe_choice(
            "detector",
            &[("mean", Detector::Mean), ("peak_hold", Detector::PeakHold)],
        )?
        .unwrap_or(Detector::Mean);
    let placement = section
        .maybe_choice("placement", &PLACEMENTS)?
        .unwrap_or(Placement::Centre);
    let bw_hz = section.maybe_quantity("bw_hz", HERTZ, Range::NotNegative)?;
    // Smoothing after detection changes no mean and no peak density read here: kept for information.
    section.maybe_quantity("video_bw_hz", HERTZ, Range::Positive)?;
    let own = (bw_hz, placement);
    let rows = section.sections("segment")?;
    let points = section.rows("points", 2)?;
    let segments = match (rows.is_empty(), points.is_empty()) {
        (true, true) => {
            return Err(section.problem_here(
                "a mask without segments",
                "tables [[set.NAME.segment]] or a list \"points\"",
            ));
        }
        (false, false) => {
            return Err(section.problem("points", "either points or segments, not both"));
        }
        (false, true) => rows
            .iter()
            .map(|row| segment(row, own, reference))
            .collect::<Result<Vec<_>, Problem>>()?,
        (true, false) => from_points(section, &points, own, reference)?,
    };
    for (at, later) in segments.iter().enumerate() {
        for (before, earlier) in segments[..at].iter().enumerate() {
            if overlap(earlier, later) {
                let key = match later.from {
                    Corner::Hz(_) => "from_hz",
                    Corner::Fraction(_) => "from_frac",
                };
                return Err(rows.get(at).unwrap_or(section).problem(
                    key,
                    format!(
                        "an offset outside segment {} ({}): segments must not overlap",
                        before + 1,
                        earlier.extent_words()
                    ),
                ));
            }
        }
    }
    if detector == Detector::Mean
        && let Some(row) = rows
            .iter()
            .zip(&segments)
            .find_map(|(row, segment)| segment.sum_of_bw_hz.map(|_| row))
    {
        return Err(row.problem(
            "sum_of_bw_hz",
            "nothing, unless the detector is \"peak_hold\"",
        ));
    }
    if detector == Detector::PeakHold && segments.iter().any(|segment| segment.bw_hz == 0.0) {
        return Err(section.problem(
            "detector",
            "\"mean\" where bw_hz is 0: a peak is read in a stated bandwidth",
        ));
    }
    Ok(Mask {
        reference,
        origin,
        detector,
        channel_hz: section.maybe_quantity("channel_hz", HERTZ, Range::Positive)?,
        authorized_bandwidth_hz: section.maybe_quantity(
            "authorized_bandwidth_hz",
            HERTZ,
            Range::Positive,
        )?,
        floor_dbm: section.maybe_quantity("floor_dbm", Dimension::Level, Range::Any)?,
        segments,
    })
}

/// Straight lines in dB over linear frequency; the last value holds further out.
fn from_points(
    section: &Section<'_>,
    points: &[Vec<f64>],
    (bw_hz, placement): (Option<f64>, Placement),
    reference: Reference,
) -> Result<Vec<Segment>, Problem> {
    let ascending = points.windows(2).all(|pair| pair[0][0] < pair[1][0]);
    if points.len() < 2 || !ascending || points[0][0] < 0.0 {
        return Err(section.problem(
            "points",
            "two or more rows [offset in Hz, limit in dB], offsets from 0 upwards and ascending",
        ));
    }
    if reference == Reference::AbsoluteDbm {
        return Err(section.problem("reference", "a reference: points are relative levels"));
    }
    let segment = |from_hz, to: Option<f64>, term| Segment {
        from: Corner::Hz(from_hz),
        to: to.map(Corner::Hz),
        bw_hz: bw_hz.unwrap_or(0.0),
        sum_of_bw_hz: None,
        placement,
        combine: Combine::Single,
        terms: vec![term],
        applies: Applies::default(),
    };
    let mut segments: Vec<Segment> = points
        .windows(2)
        .map(|pair| {
            let (from_hz, from_db) = (pair[0][0], pair[0][1]);
            let (to_hz, to_db) = (pair[1][0], pair[1][1]);
            let term = if from_db == to_db {
                Term::Const { db: from_db }
            } else {
                Term::Linear {
                    at_hz: from_hz,
                    at_db: from_db,
                    slope_db_per_hz: (to_db - from_db) / (to_hz - from_hz),
                }
            };
            segment(from_hz, Some(to_hz), term)
        })
        .collect();
    if let Some(last) = points.last() {
        segments.push(segment(last[0], None, Term::Const { db: last[1] }));
    }
    Ok(segments)
}

fn segment(
    row: &Section<'_>,
    (own_bw_hz, own_placement): (Option<f64>, Placement),
    reference: Reference,
) -> Result<Segment, Problem> {
    let corner = |in_hz: &'static str, in_fraction: &'static str| {
        let hz = row.maybe_quantity(in_hz, HERTZ, Range::NotNegative)?;
        let fraction = row.maybe_quantity(in_fraction, Dimension::Ratio, Range::NotNegative)?;
        match (hz, fraction) {
            (Some(_), Some(_)) => {
                Err(row.problem(in_fraction, format!("{in_hz} or {in_fraction}, not both")))
            }
            (Some(hz), None) => Ok(Some(Corner::Hz(hz))),
            (None, fraction) => Ok(fraction.map(Corner::Fraction)),
        }
    };
    let Some(from) = corner("from_hz", "from_frac")? else {
        return Err(row.problem("from_hz", "where the segment starts, Hz (or from_frac)"));
    };
    let to = corner("to_hz", "to_frac")?;
    match (from, to) {
        (Corner::Hz(from_hz), Some(Corner::Hz(to_hz))) if to_hz < from_hz => {
            return Err(row.problem(
                "to_hz",
                format!(
                    "{} or more (from_hz), or no to_hz for an open end",
                    show(from_hz, "Hz", 6)
                ),
            ));
        }
        (Corner::Fraction(from), Some(Corner::Fraction(to))) if to <= from => {
            return Err(row.problem("to_frac", format!("more than {from} (from_frac)")));
        }
        (Corner::Hz(_), Some(Corner::Fraction(_))) => {
            return Err(row.problem("to_frac", "to_hz: both ends in Hz, or both as fractions"));
        }
        (Corner::Fraction(_), Some(Corner::Hz(_))) => {
            return Err(row.problem("to_hz", "to_frac: both ends in Hz, or both as fractions"));
        }
        _ => {}
    }
    let rows = row.sections("term")?;
    let terms = rows
        .iter()
        .map(|section| term(section, from, reference))
        .collect::<Result<Vec<_>, Problem>>()?;
    if terms.is_empty() {
        return Err(row.problem(
            "term",
            "one or more terms, such as [{ form = \"const\", db = -25.0 }]",
        ));
    }
    let combine = row.maybe_choice(
        "combine",
        &[
            ("single", Combine::Single),
            ("most_lenient", Combine::MostLenient),
            ("strictest", Combine::Strictest),
            ("both", Combine::Both),
        ],
    )?;
    let combine = match combine {
        None | Some(Combine::Single) if terms.len() > 1 => {
            return Err(row.problem(
                "combine",
                format!(
                    "\"most_lenient\", \"strictest\" or \"both\" for {} terms",
                    terms.len()
                ),
            ));
        }
        combine => combine.unwrap_or(Combine::Single),
    };
    let bw_hz = row
        .maybe_quantity("bw_hz", HERTZ, Range::NotNegative)?
        .or(own_bw_hz);
    let Some(bw_hz) = bw_hz else {
        return Err(row.problem(
            "bw_hz",
            "the measuring bandwidth, Hz, here or in the set; 0 where the rule fixes none",
        ));
    };
    let placement = row.maybe_choice("placement", &PLACEMENTS)?;
    let sum_of_bw_hz = row.maybe_quantity("sum_of_bw_hz", HERTZ, Range::Positive)?;
    if sum_of_bw_hz.is_some_and(|narrow_hz| narrow_hz >= bw_hz) {
        return Err(row.problem(
            "sum_of_bw_hz",
            format!("less than bw_hz, {}", show(bw_hz, "Hz", 6)),
        ));
    }
    let segment = Segment {
        from,
        to,
        bw_hz,
        sum_of_bw_hz,
        placement: placement.unwrap_or(own_placement),
        combine,
        terms,
        applies: applies(row)?,
    };
    row.finish()?;
    Ok(segment)
}
