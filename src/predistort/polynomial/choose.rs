//! The size of a polynomial by cross-validation.

use num_complex::Complex64;

use super::fit::{FitError, rows};
use super::terms::{Form, PolynomialSize};
use crate::drive::Polynomial;
use crate::math::least_squares::LeastSquares;

/// Stretches of the samples, each left out of the fit once.
const FOLDS: usize = 5;

/// A size this close to the best is as good, dB.
const AS_GOOD_DB: f64 = 0.3;

/// One size and how well it does on samples that it was not fitted to.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Candidate {
    /// The size.
    pub size: PolynomialSize,
    /// Number of terms.
    pub terms: usize,
    /// Real multiplications a sample.
    pub multiplications: usize,
    /// Error over target on the stretches left out, in power.
    pub held_out_nmse_db: f64,
    /// Condition number of all samples' columns at norm one.
    pub condition: f64,
}

/// All sizes tried, and the one taken.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Choice {
    /// In the order of their cost.
    pub candidates: Vec<Candidate>,
    /// The cheapest within 0.3 dB of the best.
    pub chosen: PolynomialSize,
}

/// Sizes to be tried: powers 2, 4, 6, 8 and lags 0 to 4; cross terms one sample to each side.
fn sizes(form: Form) -> Vec<PolynomialSize> {
    let mut sizes = Vec::new();
    for power in [2, 4, 6, 8] {
        for memory in 0..=4 {
            sizes.push(PolynomialSize {
                form,
                power,
                memory,
                cross: 1,
            });
        }
    }
    sizes
}

/// Chooses the size of `form` for the samples `input` and `output`.
///
/// # Errors
/// [`FitError`] where no size can be fitted.
pub fn choose(
    form: Form,
    ridge: f64,
    input: &[Complex64],
    output: &[Complex64],
) -> Result<Choice, FitError> {
    if input.len() != output.len() {
        return Err(FitError::Uneven {
            input: input.len(),
            output: output.len(),
        });
    }
    let mut candidates = Vec::new();
    let mut refused = None;
    for size in sizes(form) {
        match validate(size, ridge, input, output) {
            Ok(candidate) => candidates.push(candidate),
            Err(error) => refused = Some(error),
        }
    }
    candidates.sort_by_key(|candidate| (candidate.multiplications, candidate.terms));
    let best = candidates
        .iter()
        .map(|candidate| candidate.held_out_nmse_db)
        .fold(f64::INFINITY, f64::min);
    let chosen = candidates
        .iter()
        .find(|candidate| candidate.held_out_nmse_db <= best + AS_GOOD_DB)
        .map(|candidate| candidate.size);
    match (chosen, refused) {
        (Some(chosen), _) => Ok(Choice { candidates, chosen }),
        (None, Some(error)) => Err(error),
        (None, None) => Err(FitError::Uneven {
            input: input.len(),
            output: 0,
        }),
    }
}

fn validate(
    size: PolynomialSize,
    ridge: f64,
    input: &[Complex64],
    output: &[Complex64],
) -> Result<Candidate, FitError> {
    let (terms, lead) = (size.terms(), size.lead());
    let fold = |index: usize| index * input.len() / FOLDS..(index + 1) * input.len() / FOLDS;
    let systems: Vec<LeastSquares> = (0..FOLDS)
        .map(|index| rows(&terms, lead, input, output, fold(index)))
        .collect();
    let merged = |without: Option<usize>| {
        let mut all = LeastSquares::new(terms.len());
        for (index, system) in systems.iter().enumerate() {
            if Some(index) != without {
                all.merge(system);
            }
        }
        all.solve(ridge).map_err(|source| FitError::Solution {
            terms: terms.len(),
            source,
        })
    };
    let (mut missed, mut target) = (0.0, 0.0);
    for (index, system) in systems.iter().enumerate() {
        let coefficients = merged(Some(index))?.coefficients;
        let (part, of) = system.missed(&coefficients);
        missed += part;
        target += of;
    }
    let condition = merged(None)?.condition;
    let polynomial = Polynomial {
        coefficients: Vec::new(),
        terms,
        lead,
        rate: 1,
    };
    Ok(Candidate {
        size,
        terms: polynomial.terms.len(),
        multiplications: polynomial.multiplications(),
        held_out_nmse_db: 10.0 * (missed / target).log10(),
        condition,
    })
}
