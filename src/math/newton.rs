//! Newton's method for a few equations in as many unknowns, with slopes by differences.

use nalgebra::{DMatrix, DVector};

/// How a search ended.
#[derive(Debug, Clone, PartialEq)]
pub enum Search {
    /// The equations hold.
    Converged {
        /// The unknowns.
        at: Vec<f64>,
        /// Evaluations of the equations.
        evaluations: usize,
    },
    /// No step made the equations hold better.
    Stuck {
        /// The best unknowns found.
        at: Vec<f64>,
        /// The largest residual there.
        residual: f64,
    },
    /// The work limit was reached.
    RanOut {
        /// The best unknowns found.
        at: Vec<f64>,
        /// The largest residual there.
        residual: f64,
    },
}

/// When to stop.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Stop {
    /// Largest residual that counts as zero.
    pub residual: f64,
    /// Newton steps at most.
    pub steps: usize,
}

/// The most a step is halved before the search counts as stuck.
const MAX_HALVINGS: usize = 30;

/// Finds a zero of `equations` from `start`. Equations that cannot be evaluated at a point give `None`: the step
/// towards it is shortened. Unknowns should be scaled near one: slopes are taken over 1e-6 of that.
pub fn search(
    start: &[f64],
    stop: Stop,
    mut equations: impl FnMut(&[f64]) -> Option<Vec<f64>>,
) -> Search {
    const DIFFERENCE: f64 = 1e-6;
    let size = start.len();
    let mut at = start.to_vec();
    let mut evaluations = 1;
    let largest = |values: &[f64]| {
        values
            .iter()
            .fold(0.0, |most: f64, value| most.max(value.abs()))
    };
    let Some(mut values) = equations(&at) else {
        return Search::Stuck {
            at,
            residual: f64::INFINITY,
        };
    };
    for _ in 0..stop.steps {
        let residual = largest(&values);
        if residual <= stop.residual {
            return Search::Converged { at, evaluations };
        }
        let mut slopes = DMatrix::zeros(size, size);
        for column in 0..size {
            let shifted = |by: f64| {
                let mut point = at.clone();
                point[column] += by;
                point
            };
            evaluations += 2;
            let (Some(after), Some(before)) = (
                equations(&shifted(DIFFERENCE)),
                equations(&shifted(-DIFFERENCE)),
            ) else {
                return Search::Stuck { at, residual };
            };
            for row in 0..size {
                slopes[(row, column)] = (after[row] - before[row]) / (2.0 * DIFFERENCE);
            }
        }
        let Some(step) = slopes.lu().solve(&DVector::from_column_slice(&values)) else {
            return Search::Stuck { at, residual };
        };
        // At most a factor of e in logarithmic unknowns, then halved until it helps.
        let mut fraction = 1.0 / step.amax().max(1.0);
        let better = (0..MAX_HALVINGS).find_map(|_| {
            let point: Vec<f64> = at
                .iter()
                .zip(step.iter())
                .map(|(x, d)| x - fraction * d)
                .collect();
            fraction /= 2.0;
            evaluations += 1;
            equations(&point)
                .filter(|new| largest(new) < residual)
                .map(|new| (point, new))
        });
        let Some((point, new)) = better else {
            return Search::Stuck { at, residual };
        };
        (at, values) = (point, new);
    }
    let residual = largest(&values);
    if residual <= stop.residual {
        Search::Converged { at, evaluations }
    } else {
        Search::RanOut { at, residual }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_a_zero_of_two_equations() {
        let stop = Stop {
            residual: 1e-13,
            steps: 50,
        };
        let found = search(&[2.0, 0.5], stop, |x| {
            Some(vec![x[0] * x[1] - 1.0, x[0] - x[1] * x[1]])
        });
        let Search::Converged { at, .. } = found else {
            panic!("{found:?}")
        };
        assert!((at[0] - 1.0).abs() < 1e-9 && (at[1] - 1.0).abs() < 1e-9);
    }

    #[test]
    fn says_when_there_is_none() {
        let stop = Stop {
            residual: 1e-12,
            steps: 50,
        };
        let found = search(&[1.0], stop, |x| Some(vec![x[0] * x[0] + 1.0]));
        assert!(!matches!(found, Search::Converged { .. }), "{found:?}");
        assert!(matches!(
            search(&[1.0], stop, |_| None),
            Search::Stuck { .. }
        ));
    }
}
