//! A limit set as a picture.

use super::figures::{MaskFigure, MaskLine};
use super::picture::Figure;
use crate::limits::{Adjacent, Conditions, Kind, LimitSet, NotStated, Reference};
use crate::verdict::mask_polyline;

/// How far past its last corner an open-ended mask is drawn.
const PAST_LAST_CORNER: f64 = 1.5;

/// The limits of `set` over the offset from the carrier, both sides; `None` for sets that are no levels over
/// offset (modulation, spurious emissions far away, descriptions of signals).
///
/// # Errors
/// A condition that the set needs and nobody stated, such as the output power.
pub fn limits_figure(
    set: &LimitSet,
    class: Option<&str>,
    conditions: &Conditions,
) -> Result<Option<Figure>, NotStated> {
    let (level_axis, points) = match &set.kind {
        Kind::Mask(mask) => {
            let known = mask.with_own(conditions);
            let origin_hz = mask.origin_hz(&known)?;
            let mut last_hz = 0.0f64;
            for segment in &mask.segments {
                let (from_hz, to_hz) = segment.ends_hz(&known)?;
                last_hz = last_hz
                    .max(from_hz)
                    .max(if to_hz.is_finite() { to_hz } else { from_hz });
            }
            let until_hz = origin_hz + PAST_LAST_CORNER * last_hz;
            let mut points = mask_polyline(mask, class, conditions, until_hz)?;
            // The line breaks around the carrier where the mask leaves it free.
            let middle = points.partition_point(|(hz, _)| *hz < 0.0);
            if points.get(middle).is_some_and(|(hz, _)| *hz > 0.0) {
                points.insert(middle, (0.0, f64::NAN));
            }
            let axis = match mask.reference {
                Reference::AbsoluteDbm => "dBm in each bandwidth".to_owned(),
                reference => format!("dB against {}", reference.words()),
            };
            (axis, points)
        }
        Kind::Adjacent(adjacent) => (
            "dB against the wanted channel".to_owned(),
            channels(adjacent, class, conditions),
        ),
        Kind::Modulation(_) | Kind::Spurious(_) | Kind::Signal(_) => return Ok(None),
    };
    let figure = MaskFigure {
        title: set.title.clone(),
        level_axis,
        lines: vec![MaskLine {
            name: set.name.clone(),
            points,
        }],
    };
    Ok(Some(figure.figure()))
}

/// Each neighbouring channel as a flat piece over its width, both sides.
fn channels(adjacent: &Adjacent, class: Option<&str>, conditions: &Conditions) -> Vec<(f64, f64)> {
    let mut upper = Vec::new();
    for row in &adjacent.rows {
        let for_power = conditions
            .power_w
            .is_none_or(|watt| row.applies.at_power(watt));
        let for_class = row.applies.to_class(class);
        let for_channel = match (row.channel_hz, conditions.channel_hz) {
            (Some(own), Some(stated)) => (own / stated - 1.0).abs() < 1e-6,
            _ => true,
        };
        if for_power && for_class && for_channel {
            let half_hz = row.filter.bandwidth_hz() / 2.0;
            // A point without a level breaks the line before each piece.
            upper.push((row.offset_hz - half_hz, f64::NAN));
            upper.push((row.offset_hz - half_hz, row.limit_db));
            upper.push((row.offset_hz + half_hz, row.limit_db));
        }
    }
    let lower = upper.iter().rev().map(|&(hz, level)| (-hz, level));
    lower.chain(upper.iter().copied()).collect()
}
