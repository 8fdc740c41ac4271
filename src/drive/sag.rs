//! What the modulator's output resistance leaves of its voltage, against the current that the stage draws there.
//!
//! ```text
//! v + R i(v) = open-circuit voltage,   i(v) from the map
//! ```

use crate::map::Map;
use crate::math::monotone::Curve;

/// Newton steps past which the bracket is halved only: the left side is close to straight.
const NEWTON_STEPS: usize = 12;

/// The voltage at the stage, solved at every instant.
#[derive(Debug, Clone)]
pub(super) struct Sag {
    ohm: f64,
    current_a: Curve,
    last_v: f64,
}

impl Sag {
    /// With `ohm` in front of the stage of `map`; none without resistance or where the map knows no current.
    pub(super) fn new(ohm: f64, map: &Map) -> Option<Self> {
        let current_a = map.supply_curve_a().filter(|_| ohm > 0.0)?.clone();
        Some(Self {
            ohm,
            last_v: current_a.domain().1,
            current_a,
        })
    }

    /// The first supply, V, from which `v + ohm i(v)` no longer rises: there the stage and the resistance have no
    /// single working point.
    pub(super) fn falls_at_v(ohm: f64, map: &Map) -> Option<f64> {
        map.supply_curve_a().filter(|_| ohm > 0.0)?;
        let open_v = |control: f64| control + ohm * map.supply_held_a(control).unwrap_or(0.0);
        let (low, high) = map.domain();
        // Between points of the map the curve keeps the order of its ends, the sum nearly so.
        let steps = 4 * map.points().len();
        let at = |step: usize| low + (high - low) * step as f64 / steps as f64;
        (0..steps)
            .find(|&step| open_v(at(step + 1)) <= open_v(at(step)))
            .map(at)
    }

    /// The voltage at the stage for the open-circuit voltage `open_v`.
    pub(super) fn push(&mut self, open_v: f64) -> f64 {
        let rest = |v: f64| v + self.ohm * self.current_a.at_held(v).0 - open_v;
        let (mut low, mut high) = (0.0, open_v.max(0.0));
        if rest(high) <= 0.0 {
            // A current that is not positive pulls nothing down.
            return high;
        }
        if rest(low) >= 0.0 {
            return low;
        }
        let mut v = self.last_v.clamp(low, high);
        for step in 0.. {
            let off = rest(v);
            if off > 0.0 {
                high = v;
            } else {
                low = v;
            }
            let slope = 1.0 + self.ohm * self.current_a.slope_held(v);
            let newton = v - off / slope;
            let next = if step < NEWTON_STEPS && newton > low && newton < high {
                newton
            } else {
                0.5 * (low + high)
            };
            if (next - v).abs() <= 1e-14 * open_v || high - low <= 1e-15 * open_v {
                v = next;
                break;
            }
            v = next;
        }
        self.last_v = v;
        v
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::map::{Control, MapPoint, Origin};
    use num_complex::Complex64;
    use proptest::prelude::*;

    /// A stage whose current is `a v + b v^2`.
    fn map(a: f64, b: f64) -> Map {
        let points = (0..=200).map(|at| {
            let v = 0.03 * f64::from(at);
            MapPoint {
                control: v,
                output_v: Complex64::new(3.0 * v, 0.0),
                supply_v: v,
                supply_a: Some(a * v + b * v * v),
                efficiency: None,
                switch_peak_v: None,
                switch_peak_a: None,
                switch_min_v: None,
                closing_v: None,
                driver_w: None,
            }
        });
        Map::new(Control::Supply, Origin::Stage, 1e8, 50.0, points.collect()).unwrap()
    }

    #[test]
    fn a_straight_current_is_a_divider_and_a_square_one_a_root() {
        let mut divider = Sag::new(2.0, &map(0.25, 0.0)).unwrap();
        for open_v in [0.0, 0.1, 3.0, 6.0] {
            // 4 ohm of stage behind 2 ohm.
            assert!((divider.push(open_v) - open_v * 4.0 / 6.0).abs() < 1e-12);
        }
        let mut root = Sag::new(2.0, &map(0.1, 0.05)).unwrap();
        for open_v in [0.5f64, 2.0, 5.0] {
            // 0.1 v^2 + 1.2 v - e = 0.
            let law = (-1.2 + (1.44 + 0.4 * open_v).sqrt()) / 0.2;
            // Cubic pieces on 200 steps of a parabola.
            assert!((root.push(open_v) - law).abs() < 1e-6, "{open_v}");
        }
    }

    #[test]
    fn a_falling_current_is_found() {
        assert_eq!(Sag::falls_at_v(2.0, &map(0.25, 0.0)), None);
        // 1 + 2 (0.6 - 0.4 v) = 0 at 2.75 V.
        let found = Sag::falls_at_v(2.0, &map(0.6, -0.2)).unwrap();
        assert!((found - 2.75).abs() < 0.05, "{found}");
        assert!(Sag::new(0.0, &map(0.25, 0.0)).is_none());
    }

    proptest! {
        #[test]
        fn the_solution_solves(ohm in 0.01f64..20.0, open in prop::collection::vec(0.0f64..6.0, 1..20)) {
            let map = map(0.1, 0.05);
            let mut sag = Sag::new(ohm, &map).unwrap();
            for open_v in open {
                let v = sag.push(open_v);
                let again = v + ohm * map.supply_held_a(v).unwrap();
                prop_assert!((again - open_v).abs() < 1e-12 * (1.0 + open_v));
            }
        }
    }
}
