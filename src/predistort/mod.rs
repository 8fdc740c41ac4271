//! Tables and polynomials that undo what the stage does: made from a map or learned, quantized as the hardware
//! would, written as files a front end loads.
//!
//! Verifying them is the study's work: the signal goes through the same chain again.

mod branch;
mod capture;
mod export;
mod polynomial;
mod read;
mod request;
mod table;

pub use branch::{Branch, BranchError};
pub use capture::{
    Cloud, HELPS_DB, InForce, LoopEnd, NextRequest, NextTable, Pass, Scout, ScoutLines, StageCurve,
    StagePoint, StaticFit, StoppedBy, judge_pass, next_table,
};
pub use export::{c_header, csv, hex_image, json, npy};
pub use polynomial::{
    COEFFICIENT_BITS, Candidate, Choice, CoefficientWords, Fit, FitError, Form, Learned,
    LearningEnd, LearningPass, PolynomialRequest, PolynomialSize, choose, fewest_bits, fit, learn,
    read_polynomial,
};
pub use read::read_table;
pub use request::{BelowFloor, DEFAULT_MU, TableRequest};
pub use table::{Entry, EntryCounts, EntryState, Table, TableError};
