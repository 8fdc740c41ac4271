//! Tables and polynomials that undo what the stage does: made from a map or learned, quantized as the hardware
//! would, written as files a front end loads.
//!
//! Verifying them is the study's work: the signal goes through the same chain again.

mod branch;
mod export;
mod polynomial;
mod read;
mod request;
mod table;

pub use branch::{Branch, BranchError};
pub use export::{c_header, csv, hex_image, json, npy};
pub use polynomial::{
    Candidate, Choice, Fit, FitError, Form, Learned, LearningEnd, LearningPass, PolynomialRequest,
    PolynomialSize, choose, fit, learn,
};
pub use read::read_table;
pub use request::{BelowFloor, DEFAULT_MU, TableRequest};
pub use table::{Entry, EntryCounts, EntryState, Table, TableError};
