//! One study from file to verdict.

mod advice;
mod average;
mod backoff;
mod built_in;
mod check;
mod closed;
mod collect;
mod compare;
mod error;
mod hardware;
mod kept;
mod load;
mod measure;
mod notch;
mod numbers;
mod parting;
mod parts;
mod predistort;
mod rank;
mod replay;
mod result;
mod run;
mod scale;
mod shapes;
mod validity;
mod warning;

pub use average::Averaged;
pub use backoff::{BackoffPoint, backoff};
pub use built_in::{BuiltIn, DEFAULT_STUDY};
pub use check::{check, check_by};
pub use closed::{ClosedRequest, ClosedResult, ClosedSide, next_from_capture};
pub use compare::{Compared, Inverted, OpenSignal, compare, compare_by};
pub use error::StudyError;
pub use load::{Hardware, Predistortion, SignalChoice, Study};
pub use measure::{CaptureMetrics, MeasureRequest, MeasureResult, measure};
pub use parting::{Band, Parting};
pub use parts::EfficiencyParts;
pub use predistort::{
    PolynomialResult, PredistortRequest, PredistortResult, Reserve, SearchEnd, SearchResult,
    SearchRow, Sweep, SweepQuantity, predistort,
};
pub use rank::{Rank, follows, ranked};
pub use replay::{By, ByMap, MarginPair, ReplayFacts};
pub use result::{
    CheckResult, Convergence, GateTrain, Metrics, Notch, RateFacts, SignalFacts, StageFacts,
};
pub use scale::Scale;
pub use shapes::Shape;
pub use warning::Warning;
