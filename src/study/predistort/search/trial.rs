//! Tables tried several at a time.

use std::sync::Mutex;

use num_complex::Complex64;

use super::{SearchRow, Wanted};
use crate::predistort::TableRequest;
use crate::signal::{Samples, Source};
use crate::study::check::{Bench, Front};
use crate::study::error::StudyError;
use crate::verdict::{Judgement, Outcome};

/// A signal longer than this is read from its file, by one table at a time: 32 MB for each thread.
const MOST_SAMPLES: u64 = 1 << 21;

/// Tables that a search usually tries.
const USUAL: f64 = 80.0;

/// Where the signal comes from.
enum Signal<'b> {
    Held(Samples),
    Read(&'b mut dyn Source),
}

/// Tries tables and remembers them.
pub(super) struct Trial<'a, 'b> {
    bench: &'a Bench<'a>,
    request: TableRequest,
    signal: Signal<'b>,
    threads: usize,
    tried: Vec<SearchRow>,
    tick: &'b mut dyn FnMut(f64),
}

/// The smallest margin; nothing where any check is undecided.
fn smallest(judgement: &Judgement) -> Option<f64> {
    let checks = &judgement.verdict.checks;
    if checks
        .iter()
        .any(|check| check.outcome == Outcome::Undecided)
    {
        return None;
    }
    checks
        .iter()
        .filter_map(|check| check.margin_db)
        .reduce(f64::min)
}

fn held(source: &mut dyn Source, samples: u64) -> Result<Samples, StudyError> {
    source.rewind()?;
    let mut all = vec![Complex64::ZERO; samples as usize];
    let mut count = 0;
    while count < all.len() {
        let got = source.read(&mut all[count..])?;
        if got == 0 {
            break;
        }
        count += got;
    }
    all.truncate(count);
    Ok(Samples::new(source.rate_hz(), all))
}

impl<'a, 'b> Trial<'a, 'b> {
    pub(super) fn new(
        bench: &'a Bench<'a>,
        request: TableRequest,
        source: &'b mut dyn Source,
        threads: usize,
        tick: &'b mut dyn FnMut(f64),
    ) -> Result<Self, StudyError> {
        let samples = bench.signal.samples;
        let signal = if samples <= MOST_SAMPLES {
            Signal::Held(held(source, samples)?)
        } else {
            Signal::Read(source)
        };
        Ok(Self {
            bench,
            request,
            signal,
            threads: threads.max(1),
            tried: Vec::new(),
            tick,
        })
    }

    /// How many are tried at a time.
    pub(super) fn at_once(&self) -> usize {
        match self.signal {
            Signal::Held(_) => self.threads,
            Signal::Read(_) => 1,
        }
    }

    /// The rows of `wanted`, in its order.
    pub(super) fn rows(&mut self, wanted: &[Wanted]) -> Result<Vec<SearchRow>, StudyError> {
        let fresh: Vec<Wanted> = wanted
            .iter()
            .filter(|wanted| self.known(wanted).is_none())
            .copied()
            .collect();
        for several in fresh.chunks(self.at_once()) {
            let rows = self.tried_now(several)?;
            self.tried.extend(rows);
            (self.tick)((self.tried.len() as f64 / USUAL).min(1.0));
        }
        Ok(wanted
            .iter()
            .filter_map(|wanted| self.known(wanted))
            .collect())
    }

    fn known(&self, (size, spacing): &Wanted) -> Option<SearchRow> {
        self.tried
            .iter()
            .find(|row| row.size == *size && row.spacing == *spacing)
            .copied()
    }

    fn tried_now(&mut self, several: &[Wanted]) -> Result<Vec<SearchRow>, StudyError> {
        let (bench, request) = (self.bench, self.request);
        match (&mut self.signal, several) {
            (Signal::Read(source), _) => several
                .iter()
                .map(|&wanted| row(bench, request, wanted, &mut **source))
                .collect(),
            (Signal::Held(samples), [one]) => Ok(vec![row(bench, request, *one, samples)?]),
            (Signal::Held(samples), _) => {
                let results: Vec<Mutex<Option<Result<SearchRow, StudyError>>>> =
                    several.iter().map(|_| Mutex::new(None)).collect();
                std::thread::scope(|scope| {
                    for (&wanted, slot) in several.iter().zip(&results) {
                        let mut own = samples.clone();
                        scope.spawn(move || {
                            let result = row(bench, request, wanted, &mut own);
                            if let Ok(mut slot) = slot.lock() {
                                *slot = Some(result);
                            }
                        });
                    }
                });
                results
                    .into_iter()
                    .filter_map(|slot| slot.into_inner().ok().flatten())
                    .collect()
            }
        }
    }
}

fn row(
    bench: &Bench<'_>,
    request: TableRequest,
    (size, spacing): Wanted,
    source: &mut dyn Source,
) -> Result<SearchRow, StudyError> {
    let table = bench.table(&TableRequest {
        size,
        spacing,
        ..request
    })?;
    let judgement = bench.judge_once(&Front::Table(table), source)?;
    Ok(SearchRow {
        size,
        spacing,
        margin_db: smallest(&judgement),
    })
}
