//! One study from file to verdict.

mod built_in;
mod check;
mod error;
mod load;
mod predistort;
mod result;
mod run;
mod warning;

pub use built_in::{BuiltIn, DEFAULT_STUDY};
pub use check::check;
pub use error::StudyError;
pub use load::{Hardware, Predistortion, SignalChoice, Study};
pub use predistort::{
    PolynomialResult, PredistortRequest, PredistortResult, Reserve, SearchEnd, SearchResult,
    SearchRow, Sweep, SweepQuantity, predistort,
};
pub use result::{CheckResult, Convergence, Metrics, Notch, RateFacts, SignalFacts, StageFacts};
pub use warning::Warning;
