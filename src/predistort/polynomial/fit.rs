//! Coefficients of a polynomial from samples of its input and its output.

use num_complex::Complex64;

use super::terms::PolynomialSize;
use crate::drive::{Polynomial, Term};
use crate::math::least_squares::{LeastSquares, LeastSquaresError};

/// Why a polynomial cannot be fitted.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum FitError {
    /// Different numbers of samples.
    #[error("{input} samples in and {output} samples out: equally many are needed")]
    Uneven {
        /// In.
        input: usize,
        /// Out.
        output: usize,
    },
    /// No solution.
    #[error("the polynomial of {terms} terms: {source}")]
    Solution {
        /// Number of terms.
        terms: usize,
        /// Why.
        source: LeastSquaresError,
    },
}

/// A fitted polynomial.
#[derive(Debug, Clone, PartialEq)]
pub struct Fit {
    /// Terms and coefficients.
    pub polynomial: Polynomial,
    /// Condition number of the columns at norm one.
    pub condition: f64,
    /// Largest magnitude of a coefficient.
    pub largest_coefficient: f64,
    /// Error over target, in power.
    pub nmse_db: f64,
}

/// The rows of samples `range`, term by term, with their targets. `output` does not lag by the lead.
pub(super) fn rows(
    terms: &[Term],
    lead: usize,
    input: &[Complex64],
    output: &[Complex64],
    range: std::ops::Range<usize>,
) -> LeastSquares {
    let reach = |term: &Term| term.signal_lag.max(term.envelope_lag);
    let memory = terms.iter().map(reach).max().unwrap_or(0);
    let mut system = LeastSquares::new(terms.len());
    for at in range.start.max(memory)..range.end.min(input.len()) {
        let row = terms.iter().map(|term| term.value(input, at));
        system.push(row, output[at - lead]);
    }
    system
}

/// The polynomial of `size` that makes `output` of `input` best.
///
/// # Errors
/// [`FitError`].
pub fn fit(
    size: &PolynomialSize,
    rate: usize,
    ridge: f64,
    input: &[Complex64],
    output: &[Complex64],
) -> Result<Fit, FitError> {
    if input.len() != output.len() {
        return Err(FitError::Uneven {
            input: input.len(),
            output: output.len(),
        });
    }
    let (terms, lead) = (size.terms(), size.lead());
    let system = rows(&terms, lead, input, output, 0..input.len());
    let solution = system.solve(ridge).map_err(|source| FitError::Solution {
        terms: terms.len(),
        source,
    })?;
    Ok(Fit {
        condition: solution.condition,
        largest_coefficient: solution
            .coefficients
            .iter()
            .map(|c| c.norm())
            .fold(0.0, f64::max),
        nmse_db: 10.0 * (solution.residual_square / solution.target_square).log10(),
        polynomial: Polynomial {
            terms,
            coefficients: solution.coefficients,
            lead,
            rate,
        },
    })
}
