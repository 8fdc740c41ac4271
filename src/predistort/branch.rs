//! The part of a map that has an inverse.

use crate::map::Map;

/// Distances of neighbouring map points past this many times their median are gaps.
const GAP: f64 = 4.0;

/// Why a map has no part with an inverse.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum BranchError {
    /// The strongest point has no weaker one to its left.
    #[error(
        "the map has no rising branch: its strongest point, at {control} {unit}, is the first one"
    )]
    NeverRises {
        /// Control of the strongest point.
        control: f64,
        /// Its unit.
        unit: &'static str,
    },
}

/// The rising branch that ends at the map's strongest point.
#[derive(Debug, Clone)]
pub struct Branch<'a> {
    map: &'a Map,
    /// Lowest and highest control of the branch.
    pub control: (f64, f64),
    /// Amplitudes at both ends, V.
    pub reach_v: (f64, f64),
    /// Map points below the branch that were left out: there the amplitude does not rise.
    pub left_out_below: usize,
    /// Map points above the strongest one.
    pub left_out_above: usize,
    /// Stretches of the control without map points, wider than four times the usual distance.
    pub gaps: Vec<(f64, f64)>,
}

impl<'a> Branch<'a> {
    /// The branch of `map`.
    ///
    /// # Errors
    /// [`BranchError`].
    pub fn of(map: &'a Map) -> Result<Self, BranchError> {
        let points = map.points();
        let amplitude: Vec<f64> = points.iter().map(|point| point.output_v.norm()).collect();
        let control: Vec<f64> = points.iter().map(|point| point.control).collect();
        // Of equally strong points the first: those after it do not rise.
        let mut top = 0;
        for (index, value) in amplitude.iter().enumerate() {
            if *value > amplitude[top] {
                top = index;
            }
        }
        let mut bottom = top;
        while bottom > 0 && amplitude[bottom - 1] < amplitude[bottom] {
            bottom -= 1;
        }
        if bottom == top {
            return Err(BranchError::NeverRises {
                control: control[top],
                unit: map.control().unit(),
            });
        }
        let controls = &control[bottom..=top];
        let mut steps: Vec<f64> = controls.windows(2).map(|pair| pair[1] - pair[0]).collect();
        steps.sort_by(f64::total_cmp);
        let usual = steps[steps.len() / 2];
        Ok(Self {
            map,
            control: (control[bottom], control[top]),
            reach_v: (amplitude[bottom], amplitude[top]),
            left_out_below: bottom,
            left_out_above: points.len() - 1 - top,
            gaps: controls
                .windows(2)
                .filter(|pair| pair[1] - pair[0] > GAP * usual)
                .map(|pair| (pair[0], pair[1]))
                .collect(),
        })
    }

    /// The control that gives `amplitude_v`, held at the branch's ends.
    pub fn control_for(&self, amplitude_v: f64) -> f64 {
        let (low, high) = self.reach_v;
        if amplitude_v <= low {
            return self.control.0;
        }
        if amplitude_v >= high {
            return self.control.1;
        }
        // A map that rises throughout solves its own pieces; of others the branch is halved to the last digit.
        self.map
            .inverse(amplitude_v)
            .unwrap_or_else(|| self.halved(amplitude_v))
    }

    /// The amplitude at `control`, V, held at the branch's ends.
    pub fn output_v(&self, control: f64) -> f64 {
        let held = control.clamp(self.control.0, self.control.1);
        self.map.output_held_v(held).0.norm()
    }

    fn halved(&self, amplitude_v: f64) -> f64 {
        let (mut low, mut high) = self.control;
        loop {
            let middle = 0.5 * (low + high);
            if middle <= low || middle >= high {
                return middle;
            }
            if self.map.output_held_v(middle).0.norm() < amplitude_v {
                low = middle;
            } else {
                high = middle;
            }
        }
    }

    /// True where `control` lies in a gap of the map.
    pub fn in_gap(&self, control: f64) -> bool {
        self.gaps
            .iter()
            .any(|&(from, to)| from < control && control < to)
    }
}
