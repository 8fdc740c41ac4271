//! Several studies side by side: the same limits, one table.

use std::sync::Mutex;
use std::sync::atomic::{AtomicUsize, Ordering};

use super::check::check_by;
use super::error::StudyError;
use super::load::Study;
use super::replay::By;
use super::result::CheckResult;
use super::warning::Warning;
use crate::drive::Scheme;
use crate::signal::Source;
use crate::verdict::Outcome;

/// Opens the signal of the study with this index.
pub type OpenSignal<'a> = dyn Fn(usize) -> Result<Box<dyn Source>, StudyError> + Sync + 'a;

/// Carries out every study, up to `threads` at a time. The results stand in the studies' order and are the same
/// for any number of threads.
///
/// `progress` is told now and then which part of the work is done, 0 to 1.
///
/// # Errors
/// The first study's, by index, that has no result; with its index.
pub fn compare(
    studies: &[Study],
    threads: usize,
    open: &OpenSignal<'_>,
    progress: &(dyn Fn(f64) + Sync),
) -> Result<Vec<CheckResult>, (usize, StudyError)> {
    compare_by(studies, By::Map, threads, open, progress)
}

/// As [`compare`], with every stage replayed where `by` says so. The baseline `class_b` has no stage and stays by map,
/// which its warnings say.
///
/// # Errors
/// As [`compare`].
pub fn compare_by(
    studies: &[Study],
    by: By,
    threads: usize,
    open: &OpenSignal<'_>,
    progress: &(dyn Fn(f64) + Sync),
) -> Result<Vec<CheckResult>, (usize, StudyError)> {
    let next = AtomicUsize::new(0);
    let parts = Mutex::new(vec![0.0; studies.len()]);
    let results: Mutex<Vec<Option<Result<CheckResult, StudyError>>>> =
        Mutex::new(studies.iter().map(|_| None).collect());
    let work = || {
        loop {
            let index = next.fetch_add(1, Ordering::Relaxed);
            let Some(study) = studies.get(index) else {
                break;
            };
            let baseline = matches!(study.scheme, Scheme::ClassB(_));
            let own = if baseline { By::Map } else { by };
            let result = open(index).and_then(|mut source| {
                check_by(study, &mut *source, own, 1, &mut |part| {
                    if let Ok(mut parts) = parts.lock() {
                        parts[index] = part;
                        progress(parts.iter().sum::<f64>() / studies.len() as f64);
                    }
                })
            });
            let result = result.map(|mut result| {
                if own != by {
                    result.warnings.push(Warning::OnlyByMap);
                }
                result
            });
            if let Ok(mut results) = results.lock() {
                results[index] = Some(result);
            }
        }
    };
    std::thread::scope(|scope| {
        for _ in 1..threads.clamp(1, studies.len().max(1)) {
            scope.spawn(work);
        }
        work();
    });
    let results = results
        .into_inner()
        .unwrap_or_else(std::sync::PoisonError::into_inner);
    results
        .into_iter()
        .flatten()
        .enumerate()
        .map(|(index, result)| result.map_err(|error| (index, error)))
        .collect()
}

/// Why a scheme stands where it does.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Rank {
    /// Which result, from 0.
    pub index: usize,
    /// In words.
    pub reason: String,
}

/// The order of preference: within limits before undecided before outside; schemes that can follow the signal
/// before those that cannot; among those within, the more efficient first, among others the larger margin.
pub fn ranked(results: &[CheckResult]) -> Vec<Rank> {
    let class = |result: &CheckResult| match result.judgement.verdict.outcome {
        Outcome::Within => 0,
        Outcome::Undecided => 1,
        Outcome::Outside => 2,
    };
    let margin = |result: &CheckResult| {
        let tightest = result.judgement.verdict.tightest();
        tightest
            .and_then(|check| check.margin_db)
            .unwrap_or(f64::NEG_INFINITY)
    };
    let mut order: Vec<usize> = (0..results.len()).collect();
    order.sort_by(|&a, &b| {
        let (a, b) = (&results[a], &results[b]);
        let by_class = (class(a), follows(a)).cmp(&(class(b), follows(b)));
        let by_margin = margin(b).total_cmp(&margin(a));
        let efficiency = |result: &CheckResult| result.metrics.efficiency.unwrap_or(-1.0);
        by_class.then(if class(a) == 0 {
            efficiency(b).total_cmp(&efficiency(a)).then(by_margin)
        } else {
            by_margin
        })
    });
    order
        .into_iter()
        .map(|index| Rank {
            index,
            reason: reason(&results[index]),
        })
        .collect()
}

/// 0 where the scheme follows the signal everywhere, 1 where it says that it cannot.
fn follows(result: &CheckResult) -> u8 {
    let coarse = |warning: &Warning| matches!(warning, Warning::GridTooCoarse { .. });
    u8::from(result.warnings.iter().any(coarse))
}

fn reason(result: &CheckResult) -> String {
    let verdict = &result.judgement.verdict;
    let tightest = verdict.tightest();
    let by = tightest.map_or(String::new(), |check| {
        format!(
            ", {} by {:+.2} dB",
            check.name,
            check.margin_db.unwrap_or(f64::NAN)
        )
    });
    let efficiency = result
        .metrics
        .efficiency
        .map_or("efficiency not known".to_owned(), |efficiency| {
            format!("{:.1} % efficient", 100.0 * efficiency)
        });
    let coarse = match follows(result) {
        0 => "",
        _ => "; cannot follow the deepest notch",
    };
    match verdict.outcome {
        Outcome::Within => format!("within all limits, {efficiency}{by}{coarse}"),
        Outcome::Undecided => format!("undecided, {efficiency}{by}{coarse}"),
        Outcome::Outside => format!("outside{by}, {efficiency}{coarse}"),
    }
}
