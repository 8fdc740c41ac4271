//! A study carried out without and with predistortion.

mod learning;
mod search;

pub use search::{Reserve, SearchEnd, SearchResult, SearchRow, Sweep, SweepQuantity};

use super::check::{Bench, Front};
use super::error::StudyError;
use super::load::Study;
use super::result::CheckResult;
use crate::predistort::{CoefficientWords, Learned, PolynomialRequest, Table, TableRequest};
use crate::signal::Source;

/// What is wanted of a study.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PredistortRequest {
    /// The table; its sizes are a start where they are searched.
    pub table: TableRequest,
    /// Searches the smallest table that keeps every limit with this reserve.
    pub search: Option<Reserve>,
    /// A polynomial to be held against the table.
    pub polynomial: Option<PolynomialRequest>,
}

/// A study without and with predistortion. The verdict is that of `after`.
#[derive(Debug, Clone)]
pub struct PredistortResult {
    /// What was asked.
    pub request: PredistortRequest,
    /// The plain scheme.
    pub before: CheckResult,
    /// The same signal through the same chain behind the quantized table.
    pub after: CheckResult,
    /// The table.
    pub table: Table,
    /// How its sizes were found.
    pub search: Option<SearchResult>,
    /// The polynomial, where one was asked for.
    pub polynomial: Option<PolynomialResult>,
}

/// A polynomial and what it does.
#[derive(Debug, Clone)]
pub struct PolynomialResult {
    /// How it was learned; its coefficients are those that the words stand for.
    pub learned: Learned,
    /// How the coefficients are held; absent where no polynomial helps.
    pub words: Option<CoefficientWords>,
    /// The study behind it; absent where learning never bettered the plain signal.
    pub after: Option<CheckResult>,
    /// Instants that it was learned from.
    pub instants: usize,
}

/// Carries `study` out without predistortion, makes a table, and carries it out again behind the table. What
/// the study's own `[predistort]` says is left aside: `request` counts.
///
/// `progress` is told now and then which part of the work is done, 0 to 1.
///
/// # Errors
/// [`StudyError`].
pub fn predistort(
    study: &Study,
    request: &PredistortRequest,
    source: &mut dyn Source,
    progress: &mut dyn FnMut(f64),
) -> Result<PredistortResult, StudyError> {
    let mut plain = study.clone();
    plain.predistort = None;
    plain.scheme.invertible()?;
    let bench = Bench::new(&plain, source)?;
    // Parts of the work, roughly: a check is 1, a search some 10, a polynomial 3.
    let parts =
        2.0 + request.search.map_or(0.0, |_| 10.0) + request.polynomial.map_or(0.0, |_| 3.0);
    let mut done = 0.0;
    let mut step = |part: f64, of: f64| progress((done_plus(&mut done, part, of)) / parts);
    let before = bench.check(Front::None, source, &mut |part| step(part, 1.0))?;
    step(f64::NAN, 1.0);
    let (table, search) = match request.search {
        None => (bench.table(&request.table)?, None),
        Some(reserve) => {
            let found = search::search(
                &bench,
                &request.table,
                reserve,
                source,
                threads(),
                &mut |part| step(part, 10.0),
            )?;
            step(f64::NAN, 10.0);
            (bench.table(&found.table)?, Some(found))
        }
    };
    let after = bench.check(Front::Table(table.clone()), source, &mut |part| {
        step(part, 1.0)
    })?;
    step(f64::NAN, 1.0);
    let polynomial = request
        .polynomial
        .map(|wanted| {
            learning::learn_and_check(&bench, &wanted, source, &mut |part| step(part, 3.0))
        })
        .transpose()?;
    Ok(PredistortResult {
        request: *request,
        before,
        after,
        table,
        search,
        polynomial,
    })
}

/// As many as the machine runs at once; what is found does not depend on it.
fn threads() -> usize {
    std::thread::available_parallelism().map_or(1, usize::from)
}

/// What is done in all, `part` of a piece of size `of` included; a part that is no number ends the piece.
fn done_plus(done: &mut f64, part: f64, of: f64) -> f64 {
    if part.is_nan() {
        *done += of;
        return *done;
    }
    *done + part.clamp(0.0, 1.0) * of
}
