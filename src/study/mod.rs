//! One study from file to verdict.

mod check;
mod error;
mod load;
mod result;
mod run;
mod warning;

pub use check::check;
pub use error::StudyError;
pub use load::{Hardware, SignalChoice, Study};
pub use result::{CheckResult, Convergence, Metrics, Notch, RateFacts, SignalFacts, StageFacts};
pub use warning::Warning;
