//! Polynomials with memory: terms, fitting, indirect learning, choice of size by cross-validation.

mod choose;
mod fit;
mod learn;
mod terms;

pub use choose::{Candidate, Choice, choose};
pub use fit::{Fit, FitError, fit};
pub use learn::{Learned, LearningEnd, LearningPass, learn};
pub use terms::{Form, PolynomialRequest, PolynomialSize};
