//! Several schemes side by side: the same limits over the same span, without and with static predistortion.
//!
//! What is common is done once: a scheme's stage is solved and its signal read for both of its checks. Every scheme
//! is sampled at the rate of the most demanding one, and none is judged farther out than all were sampled, so that
//! margins are of the same readings.

use std::sync::Mutex;
use std::sync::atomic::{AtomicUsize, Ordering};

use super::check::{Bench, Common};
use super::error::StudyError;
use super::load::Study;
use super::replay::{By, is_refusal};
use super::result::CheckResult;
use super::warning::Warning;
use crate::drive::{Inversion, Scheme};
use crate::map::Map;
use crate::signal::Source;
use crate::transmit::ReplayError;

/// Opens the signal of the study with this index.
pub type OpenSignal<'a> = dyn Fn(usize) -> Result<Box<dyn Source>, StudyError> + Sync + 'a;

/// The part of the common sample rate up to which open-ended segments are judged, to each side: near half of it
/// steps of pulses and rails fold back.
const JUDGED_PART: f64 = 0.45;

/// Outputs within this part of full output from a straight line have nothing to undo: 180 dB down.
const STRAIGHT: f64 = 1e-9;

/// Static predistortion from the inverse of the scheme's own map.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Inverted {
    /// The scheme knows nothing of the stage's bends.
    Without,
    /// A table in front of it, or the law of its widths.
    With,
    /// Its map is straight: there is nothing to undo.
    Straight,
}

impl Inverted {
    /// In tables.
    pub fn word(self) -> &'static str {
        match self {
            Self::Without => "no",
            Self::With => "yes",
            Self::Straight => "nothing to undo",
        }
    }
}

/// One scheme of a comparison, carried out.
#[derive(Debug, Clone)]
pub struct Compared {
    /// Which of the schemes, from 0.
    pub scheme: usize,
    /// With or without predistortion.
    pub inverted: Inverted,
    /// What was found.
    pub result: CheckResult,
}

/// A check to be made.
struct Entry {
    scheme: usize,
    inverted: Inverted,
    study: Study,
}

/// The checks that `study`, the one with index `scheme`, asks for.
fn entries(scheme: usize, study: &Study) -> Vec<Entry> {
    let entry = |inverted, study: Study| Entry {
        scheme,
        inverted,
        study,
    };
    let plain = |scheme| Study {
        scheme,
        predistort: None,
        ..study.clone()
    };
    if study.predistort.is_some() {
        // A study's own predistortion counts as it stands.
        return vec![
            entry(Inverted::Without, plain(study.scheme.clone())),
            entry(Inverted::With, study.clone()),
        ];
    }
    match study.scheme.inversion() {
        Inversion::Table => {
            // With the inverse itself.
            vec![
                entry(Inverted::Without, plain(study.scheme.clone())),
                entry(Inverted::With, study.clone()),
            ]
        }
        Inversion::Law { without, with } => vec![
            entry(Inverted::Without, plain(*without)),
            entry(Inverted::With, plain(*with)),
        ],
        Inversion::Straight => vec![entry(Inverted::Straight, study.clone())],
    }
}

/// Carries out every study without and with predistortion, up to `threads` checks at a time. The results stand in
/// the studies' order, without before with, and are the same for any number of threads.
///
/// `progress` is told now and then which part of the work is done, 0 to 1.
///
/// # Errors
/// That of the first study, by index, that has no result; with its index.
pub fn compare(
    studies: &[Study],
    threads: usize,
    open: &OpenSignal<'_>,
    progress: &(dyn Fn(f64) + Sync),
) -> Result<Vec<Compared>, (usize, StudyError)> {
    compare_by(studies, By::Map, threads, open, progress)
}

/// As [`compare`], with every stage replayed where `by` says so. The baseline `class_b` has no stage, and some
/// stages and schemes are not replayed: they stay by map, which their warnings say.
///
/// # Errors
/// As [`compare`].
pub fn compare_by(
    studies: &[Study],
    by: By,
    threads: usize,
    open: &OpenSignal<'_>,
    progress: &(dyn Fn(f64) + Sync),
) -> Result<Vec<Compared>, (usize, StudyError)> {
    let entries: Vec<Entry> = studies
        .iter()
        .enumerate()
        .flat_map(|(scheme, study)| entries(scheme, study))
        .collect();
    let firsts: Vec<&Entry> = (0..studies.len())
        .filter_map(|scheme| entries.iter().find(|entry| entry.scheme == scheme))
        .collect();
    let solved = in_order(threads, &firsts, |entry| {
        let mut source = open(entry.scheme)?;
        Bench::new(&entry.study, &mut *source)
    })
    .map_err(|(at, error)| (firsts[at].scheme, error))?;
    let mut jobs = Vec::with_capacity(entries.len());
    for entry in &entries {
        let bench = solved[entry.scheme].with_study(&entry.study);
        let Some(inverted) = counted(entry, &bench.map) else {
            continue;
        };
        let front = match (inverted, &entry.study.predistort) {
            (Inverted::With, None) if entry.study.scheme.inversion() == Inversion::Table => {
                bench.inverse()
            }
            _ => bench.front(),
        };
        let front = front.map_err(|error| (entry.scheme, error))?;
        jobs.push((entry, inverted, bench, front));
    }
    let rate_hz = jobs
        .iter()
        .map(|(_, _, bench, front)| bench.rate_hz(front))
        .fold(0.0, f64::max);
    for (_, _, bench, _) in &mut jobs {
        bench.common = Some(Common {
            rate_hz,
            until_hz: JUDGED_PART * rate_hz,
        });
    }
    let parts = Mutex::new(vec![0.0; jobs.len()]);
    let told = |at: usize, part: f64| {
        if let Ok(mut parts) = parts.lock() {
            parts[at] = part;
            progress(parts.iter().sum::<f64>() / parts.len() as f64);
        }
    };
    let numbered: Vec<_> = jobs.iter().enumerate().collect();
    let results = in_order(threads, &numbered, |(at, (entry, _, bench, front))| {
        let mut source = open(entry.scheme)?;
        let mut tell = |part| told(*at, part);
        let scheme = entry.study.scheme.name();
        let replayed = match entry.study.scheme {
            Scheme::ClassB(_) if by != By::Map => Err(ReplayError::Scheme { scheme }.into()),
            _ => bench.check_by(front.clone(), &mut *source, by, 1, &mut tell),
        };
        match replayed {
            Err(StudyError::Replay(error)) if is_refusal(&error) => {
                let mut source = open(entry.scheme)?;
                let mut result = bench.check(front.clone(), &mut *source, &mut tell)?;
                result.warnings.push(Warning::OnlyByMap {
                    scheme,
                    reason: sentence(&error.to_string()),
                });
                Ok(result)
            }
            replayed => replayed,
        }
    })
    .map_err(|(at, error)| (jobs[at].0.scheme, error))?;
    let compared = jobs
        .iter()
        .zip(results)
        .map(|((entry, inverted, ..), result)| Compared {
            scheme: entry.scheme,
            inverted: *inverted,
            result,
        });
    Ok(compared.collect())
}

/// With a capital in front.
fn sentence(text: &str) -> String {
    let mut letters = text.chars();
    let first = letters.next().map(|letter| letter.to_ascii_uppercase());
    first.into_iter().chain(letters).collect()
}

/// How `entry` counts where its map is `map`. A table's inverse of a straight map is the straight line itself: one
/// check does for both.
fn counted(entry: &Entry, map: &Map) -> Option<Inverted> {
    let nothing_to_undo = entry.study.predistort.is_none()
        && entry.study.scheme.inversion() == Inversion::Table
        && is_straight(map);
    match (nothing_to_undo, entry.inverted) {
        (false, inverted) => Some(inverted),
        (true, Inverted::With) => None,
        (true, _) => Some(Inverted::Straight),
    }
}

/// Whether the output of every point is that of the last one times its part of the control.
fn is_straight(map: &Map) -> bool {
    let Some(top) = map.points().last() else {
        return false;
    };
    map.failures().is_empty()
        && map.points().iter().all(|point| {
            let line = top.output_v * (point.control / top.control);
            (point.output_v - line).norm() <= STRAIGHT * top.output_v.norm()
        })
}

/// `work` on every item, up to `threads` at a time; the results in the items' order.
fn in_order<I: Sync, T: Send>(
    threads: usize,
    items: &[I],
    work: impl Fn(&I) -> Result<T, StudyError> + Sync,
) -> Result<Vec<T>, (usize, StudyError)> {
    let next = AtomicUsize::new(0);
    let results: Mutex<Vec<Option<Result<T, StudyError>>>> =
        Mutex::new(items.iter().map(|_| None).collect());
    let take = || {
        loop {
            let index = next.fetch_add(1, Ordering::Relaxed);
            let Some(item) = items.get(index) else {
                break;
            };
            let result = work(item);
            if let Ok(mut results) = results.lock() {
                results[index] = Some(result);
            }
        }
    };
    std::thread::scope(|scope| {
        for _ in 1..threads.clamp(1, items.len().max(1)) {
            scope.spawn(take);
        }
        take();
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
