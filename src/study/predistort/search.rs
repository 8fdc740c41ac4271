//! The smallest table that keeps every limit with a reserve.
//!
//! Depth, amplitude bits and phase bits are first varied alone, the other two at their finest. The smallest value
//! of each that keeps the reserve bounds it from below, as one coarse quantity does not mend another; from
//! there on sizes are tried in the order of the bits they store until one keeps the reserve.

use crate::drive::LookupSize;
use crate::predistort::TableRequest;
use crate::signal::Source;
use crate::study::check::{Bench, Front};
use crate::study::error::StudyError;
use crate::verdict::{Judgement, Outcome};

/// Depths and bits that are tried, finest last.
const DEPTHS: [usize; 10] = [4, 8, 16, 32, 64, 128, 256, 512, 1024, 2048];
const BITS: [u32; 12] = [4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 16];

/// How far beyond the bounds the combined search looks: doublings of the depth and further bits.
const BEYOND: usize = 3;

/// Margin that must be left.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Reserve {
    /// dB, above every limit.
    pub db: f64,
}

/// What was varied alone.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum SweepQuantity {
    /// Entries.
    Depth,
    /// Bits of the control's words.
    AmplitudeBits,
    /// Bits of the phase's words.
    PhaseBits,
}

/// One table that was tried.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct SearchRow {
    /// Its sizes.
    pub size: LookupSize,
    /// The smallest margin of all limits, dB; absent where a limit could not be decided.
    pub margin_db: Option<f64>,
}

/// One quantity varied alone.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Sweep {
    /// Which.
    pub quantity: SweepQuantity,
    /// Coarsest first.
    pub rows: Vec<SearchRow>,
}

/// What the search found.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct SearchResult {
    /// The margin asked for.
    pub reserve: Reserve,
    /// Every quantity varied alone.
    pub sweeps: Vec<Sweep>,
    /// Combinations tried, smallest first.
    pub combined: Vec<SearchRow>,
    /// The table taken: the smallest with the reserve, or the best where none has it.
    pub table: TableRequest,
    /// Whether the reserve is kept.
    pub end: SearchEnd,
}

/// How the search ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum SearchEnd {
    /// The smallest table tried that keeps the reserve.
    Found,
    /// No table keeps it, not the finest either: the best of all tried was taken.
    OutOfReach,
}

struct Search<'a> {
    bench: &'a Bench<'a>,
    request: TableRequest,
    reserve: Reserve,
    source: &'a mut dyn Source,
    tried: Vec<SearchRow>,
    /// Told how many tables were tried.
    tick: &'a mut dyn FnMut(f64),
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

impl Search<'_> {
    fn with(&self, size: LookupSize) -> TableRequest {
        TableRequest {
            size,
            ..self.request
        }
    }

    fn size(&self, depth: usize, amplitude_bits: u32, phase_bits: u32) -> LookupSize {
        LookupSize {
            depth,
            address_bits: TableRequest::address_bits_for(depth, self.request.between),
            amplitude_bits,
            phase_bits,
        }
    }

    fn try_size(&mut self, size: LookupSize) -> Result<SearchRow, StudyError> {
        if let Some(row) = self.tried.iter().find(|row| row.size == size) {
            return Ok(*row);
        }
        let table = self.bench.table(&self.with(size))?;
        let judgement = self.bench.judge_once(&Front::Table(table), self.source)?;
        let row = SearchRow {
            size,
            margin_db: smallest(&judgement),
        };
        self.tried.push(row);
        // The three sweeps are 34 tables, the combinations usually a few.
        (self.tick)((self.tried.len() as f64 / 40.0).min(1.0));
        Ok(row)
    }

    fn keeps(&self, row: &SearchRow) -> bool {
        row.margin_db
            .is_some_and(|margin_db| margin_db >= self.reserve.db)
    }

    /// The smallest value from which on every larger one keeps the reserve, as an index.
    fn bound(&self, rows: &[SearchRow]) -> Option<usize> {
        let kept = rows.iter().rev().take_while(|row| self.keeps(row)).count();
        (kept > 0).then(|| rows.len() - kept)
    }
}

/// Searches the sizes of `request`; its spacing and interpolation stay.
pub(super) fn search(
    bench: &Bench<'_>,
    request: &TableRequest,
    reserve: Reserve,
    source: &mut dyn Source,
    tick: &mut dyn FnMut(f64),
) -> Result<SearchResult, StudyError> {
    let mut search = Search {
        bench,
        request: *request,
        reserve,
        source,
        tried: Vec::new(),
        tick,
    };
    let (deepest, finest) = (DEPTHS[DEPTHS.len() - 1], BITS[BITS.len() - 1]);
    let mut sweep = |quantity, sizes: Vec<(usize, u32, u32)>| -> Result<Sweep, StudyError> {
        let rows = sizes
            .into_iter()
            .map(|(depth, amplitude, phase)| {
                let size = search.size(depth, amplitude, phase);
                search.try_size(size)
            })
            .collect::<Result<_, _>>()?;
        Ok(Sweep { quantity, rows })
    };
    let sweeps = vec![
        sweep(
            SweepQuantity::Depth,
            DEPTHS.map(|depth| (depth, finest, finest)).to_vec(),
        )?,
        sweep(
            SweepQuantity::AmplitudeBits,
            BITS.map(|bits| (deepest, bits, finest)).to_vec(),
        )?,
        sweep(
            SweepQuantity::PhaseBits,
            BITS.map(|bits| (deepest, finest, bits)).to_vec(),
        )?,
    ];
    let bounds: Option<Vec<usize>> = sweeps
        .iter()
        .map(|sweep| search.bound(&sweep.rows))
        .collect();
    let mut combined = Vec::new();
    let mut found = None;
    if let Some(bounds) = bounds {
        for size in beyond(&search, &bounds) {
            let row = search.try_size(size)?;
            combined.push(row);
            if search.keeps(&row) {
                found = Some(row);
                break;
            }
        }
    }
    let margin = |row: &SearchRow| row.margin_db.unwrap_or(f64::NEG_INFINITY);
    let (row, end) = match found {
        Some(row) => (Some(row), SearchEnd::Found),
        None => (
            search
                .tried
                .iter()
                .max_by(|a, b| margin(a).total_cmp(&margin(b)))
                .copied(),
            SearchEnd::OutOfReach,
        ),
    };
    Ok(SearchResult {
        reserve,
        sweeps,
        combined,
        table: row.map_or(*request, |row| search.with(row.size)),
        end,
    })
}

/// Sizes from the bounds upwards, in the order of the bits they store.
fn beyond(search: &Search<'_>, bounds: &[usize]) -> Vec<LookupSize> {
    let steps = |all: usize, from: usize| from..all.min(from + BEYOND + 1);
    let mut sizes = Vec::new();
    for depth in steps(DEPTHS.len(), bounds[0]) {
        for amplitude in steps(BITS.len(), bounds[1]) {
            for phase in steps(BITS.len(), bounds[2]) {
                sizes.push(search.size(DEPTHS[depth], BITS[amplitude], BITS[phase]));
            }
        }
    }
    sizes.sort_by_key(LookupSize::stored_bits);
    sizes
}
