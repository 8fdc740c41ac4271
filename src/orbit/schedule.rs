//! Which switches are closed when: one period as a cyclic sequence of intervals.

use std::f64::consts::TAU;

/// Edges closer than this are one, rad: a few rounding errors of an angle.
const TOGETHER_RAD: f64 = 1e-13;

/// The positions of all contacts: bit `k` is set where contact `k` is closed.
pub type Closed = u32;

/// When one contact is closed. A width of 0 or less: never.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Span {
    pub closing_rad: f64,
    pub width_rad: f64,
}

/// A part of the period in which nothing is switched.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Interval {
    pub from_rad: f64,
    pub length_rad: f64,
    pub closed: Closed,
}

/// One period, from the instant that the first contact closes, for contacts that are closed during `spans`. Edges
/// in any order, overlapping or at the same instant.
pub fn schedule(spans: &[Span]) -> Vec<Interval> {
    let origin = spans.first().map_or(0.0, |span| span.closing_rad);
    let turned = |angle: f64| {
        let offset = (angle - origin).rem_euclid(TAU);
        if TAU - offset < TOGETHER_RAD {
            0.0
        } else {
            offset
        }
    };
    let mut edges = Vec::with_capacity(1 + 2 * spans.len());
    edges.push(0.0);
    for span in spans.iter().filter(|span| span.width_rad > 0.0) {
        edges.push(turned(span.closing_rad));
        edges.push(turned(span.closing_rad + span.width_rad));
    }
    edges.sort_by(f64::total_cmp);
    edges.dedup_by(|late, early| *late - *early < TOGETHER_RAD);
    let ends = edges.iter().skip(1).chain([&TAU]);
    let mut intervals: Vec<Interval> = Vec::with_capacity(edges.len());
    for (&from, &to) in edges.iter().zip(ends) {
        let middle = origin + 0.5 * (from + to);
        let mut closed = 0;
        for (index, span) in spans.iter().enumerate() {
            if (middle - span.closing_rad).rem_euclid(TAU) < span.width_rad {
                closed |= 1 << index;
            }
        }
        match intervals.last_mut() {
            // An edge that changes nothing.
            Some(last) if last.closed == closed => last.length_rad += to - from,
            _ => intervals.push(Interval {
                from_rad: origin + from,
                length_rad: to - from,
                closed,
            }),
        }
    }
    intervals
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn span(closing_rad: f64, width_rad: f64) -> Span {
        Span {
            closing_rad,
            width_rad,
        }
    }

    #[test]
    fn one_switch_has_two_intervals() {
        let all = schedule(&[span(-1.0, 2.5)]);
        assert_eq!(all.iter().map(|i| i.closed).collect::<Vec<_>>(), [0b1, 0b0]);
        assert!((all[0].from_rad + 1.0).abs() < 1e-15 && (all[0].length_rad - 2.5).abs() < 1e-15);
        assert!((all[1].length_rad - (TAU - 2.5)).abs() < 1e-15);
    }

    #[test]
    fn two_with_gaps_have_four_and_without_two() {
        let closed =
            |spans: &[Span]| -> Vec<Closed> { schedule(spans).iter().map(|i| i.closed).collect() };
        let pair = [span(-1.5, 3.0), span(1.6, TAU - 3.2)];
        assert_eq!(closed(&pair), [0b01, 0b00, 0b10, 0b00]);
        // Edges that coincide up to rounding, three turns away.
        let tight = [span(0.1, 3.0), span(3.1 + 3.0 * TAU, TAU - 3.0)];
        assert_eq!(closed(&tight), [0b01, 0b10]);
        assert_eq!(closed(&[span(0.0, 1.0), span(0.0, -0.1)]), [0b01, 0b00]);
        assert_eq!(closed(&[span(0.0, 2.0), span(1.0, 2.0)]), [1, 3, 2, 0]);
    }

    proptest! {
        #[test]
        fn every_contact_is_closed_for_its_width(
            spans in prop::collection::vec((-20.0f64..20.0, 0.01f64..6.2), 1..5)
        ) {
            let spans: Vec<Span> = spans.iter().map(|&(c, w)| span(c, w)).collect();
            let all = schedule(&spans);
            let total: f64 = all.iter().map(|i| i.length_rad).sum();
            prop_assert!((total - TAU).abs() < 1e-12);
            for (index, span) in spans.iter().enumerate() {
                let width: f64 = all
                    .iter()
                    .filter(|i| i.closed & (1 << index) != 0)
                    .map(|i| i.length_rad)
                    .sum();
                prop_assert!((width - span.width_rad).abs() < 1e-11);
            }
            for pair in all.windows(2) {
                prop_assert!(pair[0].closed != pair[1].closed);
                let end = pair[0].from_rad + pair[0].length_rad;
                prop_assert!((end - pair[1].from_rad).abs() < 1e-11);
            }
        }
    }
}
