//! One study from file to verdict.

mod average;
mod built_in;
mod check;
mod closed;
mod collect;
mod compare;
mod error;
mod load;
mod measure;
mod predistort;
mod result;
mod run;
mod scale;
mod warning;

pub use average::Averaged;
pub use built_in::{BuiltIn, DEFAULT_STUDY};
pub use check::check;
pub use closed::{ClosedRequest, ClosedResult, ClosedSide, next_from_capture};
pub use compare::{OpenSignal, Rank, compare, ranked};
pub use error::StudyError;
pub use load::{Hardware, Predistortion, SignalChoice, Study};
pub use measure::{CaptureMetrics, MeasureRequest, MeasureResult, measure};
pub use predistort::{
    PolynomialResult, PredistortRequest, PredistortResult, Reserve, SearchEnd, SearchResult,
    SearchRow, Sweep, SweepQuantity, predistort,
};
pub use result::{CheckResult, Convergence, Metrics, Notch, RateFacts, SignalFacts, StageFacts};
pub use scale::Scale;
pub use warning::Warning;
