//! A width map at other supplies: solved ones where the stage is curved, scaled ones where it is linear.

use num_complex::Complex64;

use super::Map;

impl Map {
    /// The same map, of the width at the full supply, with those at lower supplies, rising: between them the output
    /// phasor and the currents are taken as straight lines, below the lowest as falling with the supply.
    #[must_use]
    pub fn with_planes(mut self, planes: Vec<Self>) -> Self {
        self.planes = planes;
        self
    }

    /// The supply that this map, or its highest plane, was solved at, V.
    pub fn own_supply_v(&self) -> f64 {
        self.points()
            .last()
            .map_or(f64::NAN, |point| point.supply_v)
    }

    /// The width map at the plane nearest to `supply_v`: for a linear stage this one, to be scaled.
    pub fn plane(&self, supply_v: f64) -> &Self {
        let off = |map: &&Self| (map.own_supply_v() - supply_v).abs();
        self.planes
            .iter()
            .chain(std::iter::once(self))
            .min_by(|a, b| off(a).total_cmp(&off(b)))
            .unwrap_or(self)
    }

    /// `of` at `supply_v`, from the planes on both sides of it.
    fn between<T>(&self, supply_v: f64, of: impl Fn(&Self) -> T) -> T
    where
        T: std::ops::Mul<f64, Output = T> + std::ops::Add<Output = T>,
    {
        let above = self
            .planes
            .partition_point(|plane| plane.own_supply_v() <= supply_v);
        let high = self.planes.get(above).unwrap_or(self);
        let high_v = high.own_supply_v();
        let Some(low) = above.checked_sub(1).and_then(|at| self.planes.get(at)) else {
            return of(high) * (supply_v / high_v);
        };
        let low_v = low.own_supply_v();
        let part = (supply_v - low_v) / (high_v - low_v);
        of(low) * (1.0 - part) + of(high) * part
    }

    /// Output phasor at the width `control` and the supply `supply_v`, V, and whether the width had to be held.
    pub fn output_at_v(&self, control: f64, supply_v: f64) -> (Complex64, bool) {
        let held = self.output_held_v(control).1;
        let output_v = self.between(supply_v, |map| map.output_held_v(control).0);
        (output_v, held)
    }

    /// Supply current at the width `control` and the supply `supply_v`, A, where the map knows it.
    pub fn supply_at_a(&self, control: f64, supply_v: f64) -> Option<f64> {
        self.supply_held_a(control)?;
        Some(self.between(supply_v, |map| {
            map.supply_held_a(control).unwrap_or(f64::NAN)
        }))
    }
}

#[cfg(test)]
mod tests {
    use super::super::{Control, MapPoint, Origin};
    use super::*;

    fn map(supply_v: f64, gain: f64) -> Map {
        let points = (1..=4).map(|at| {
            let control = 0.1 * f64::from(at);
            MapPoint {
                control,
                output_v: Complex64::from_polar(gain * control, 0.3 * gain),
                supply_v,
                supply_a: Some(gain * control),
                efficiency: None,
                switch_peak_v: None,
                switch_peak_a: None,
                switch_min_v: None,
                closing_v: None,
                driver_w: None,
            }
        });
        Map::new(Control::Width, Origin::Stage, 1e6, 50.0, points.collect()).unwrap()
    }

    #[test]
    fn planes_hold_and_between_them_lines_run() {
        let curved = map(6.0, 5.0).with_planes(vec![map(2.0, 1.0), map(4.0, 3.0)]);
        for (supply_v, gain) in [(2.0, 1.0), (4.0, 3.0), (6.0, 5.0)] {
            let (output_v, held) = curved.output_at_v(0.2, supply_v);
            assert!(!held);
            assert!((output_v - Complex64::from_polar(0.2 * gain, 0.3 * gain)).norm() < 1e-12);
            assert_eq!(curved.plane(supply_v).own_supply_v(), supply_v);
        }
        assert!((curved.supply_at_a(0.2, 5.0).unwrap() - 0.8).abs() < 1e-12);
        assert!((curved.supply_at_a(0.2, 1.0).unwrap() - 0.1).abs() < 1e-12);
        // A linear stage scales.
        let linear = map(6.0, 5.0);
        let (half, full) = (
            linear.output_at_v(0.2, 3.0).0,
            linear.output_at_v(0.2, 6.0).0,
        );
        assert!((2.0 * half - full).norm() < 1e-12);
    }
}
