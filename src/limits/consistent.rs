//! What a mask must not contradict: itself, and its check points.

use super::mask::{Conditions, Corner, LimitLevel, Mask, Segment};
use super::rows::Applies;
use super::set::CheckPoint;
use crate::input::{Problem, Section};

/// True where two segments could both hold at one offset.
pub(super) fn overlap(a: &Segment, b: &Segment) -> bool {
    let numbers = |segment: &Segment| {
        let (from, fraction) = match segment.from {
            Corner::Hz(hz) => (hz, false),
            Corner::Fraction(fraction) => (fraction, true),
        };
        let to = match segment.to {
            Some(Corner::Hz(to) | Corner::Fraction(to)) => to,
            None => f64::INFINITY,
        };
        (from, to, fraction)
    };
    let ((a_from, a_to, a_fraction), (b_from, b_to, b_fraction)) = (numbers(a), numbers(b));
    let holds_point =
        |from: f64, to: f64, at: f64| at > from && at <= to || at == from && from == to;
    let share_offsets = match (a_from == a_to, b_from == b_to) {
        (true, _) => holds_point(b_from, b_to, a_from),
        (_, true) => holds_point(a_from, a_to, b_from),
        _ => a_from < b_to && b_from < a_to,
    };
    let share_classes = a.applies.classes.is_empty()
        || b.applies.classes.is_empty()
        || a.applies
            .classes
            .iter()
            .any(|class| b.applies.classes.contains(class));
    let range = |applies: &Applies| {
        (
            applies.min_power_w.unwrap_or(0.0),
            applies.max_power_w.unwrap_or(f64::INFINITY),
        )
    };
    let ((a_min, a_max), (b_min, b_max)) = (range(&a.applies), range(&b.applies));
    let share_powers = a_min < b_max && b_min < a_max;
    a_fraction == b_fraction && share_offsets && share_classes && share_powers
}

/// Holds `check` against the mask: a file that contradicts its own check points is refused.
pub(super) fn hold(mask: &Mask, check: &CheckPoint, row: &Section<'_>) -> Result<(), Problem> {
    let conditions = Conditions {
        power_w: check.power_w,
        authorized_bandwidth_hz: check.authorized_bandwidth_hz,
        ..Conditions::default()
    };
    let level = mask
        .limit_at(check.offset_hz, None, &conditions)
        .map_err(|error| row.problem_here("a check point", format!("its conditions ({error})")))?;
    // Half of the last of three printed decimals.
    let limit_db = match level {
        Some(LimitLevel::Relative { db }) => db,
        _ => f64::NAN,
    };
    if (limit_db - check.limit_db).abs() <= 0.000_5 + 1e-9 {
        Ok(())
    } else {
        Err(row.problem(
            "limit_db",
            format!("{limit_db:.3} dB, which is what the segments give there"),
        ))
    }
}
