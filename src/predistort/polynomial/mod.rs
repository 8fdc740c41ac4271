//! Polynomials with memory: terms, fitting, indirect learning, choice of size by cross-validation.

mod choose;
mod fit;
mod learn;
mod read;
mod terms;
mod words;

pub use choose::{Candidate, Choice, choose};
pub use fit::{Fit, FitError, fit};
pub use learn::{Learned, LearningEnd, LearningPass, learn};
pub use read::read_polynomial;
pub use terms::{Form, PolynomialRequest, PolynomialSize};
pub use words::{COEFFICIENT_BITS, CoefficientWords, fewest_bits};
