//! The smallest table that keeps every limit with a reserve.
//!
//! The depth is first varied for every spacing of the addresses, all bits at their finest; the spacing that keeps the
//! reserve with the fewest entries is taken. Then amplitude bits, phase bits and, between entries on straight
//! lines, address bits are varied alone, everything else at its finest. The smallest value of each that keeps the
//! reserve bounds it from below, as one coarse quantity does not mend another; from there on sizes are tried in
//! the order of the bits they store, then of the address bits, until one keeps the reserve.
//!
//! Tables are tried several at a time. Which ones are, in which order, and what comes out do not depend on how many.

mod trial;

use trial::Trial;

use crate::drive::{Between, LookupSize, Spacing};
use crate::predistort::{DEFAULT_MU, TableRequest};
use crate::signal::Source;
use crate::study::check::Bench;
use crate::study::error::StudyError;

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
    /// Bits of the address.
    AddressBits,
}

/// One table that was tried.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct SearchRow {
    /// Its sizes.
    pub size: LookupSize,
    /// How its addresses are spread.
    pub spacing: Spacing,
    /// The smallest margin of all limits, dB; absent where a limit could not be decided.
    pub margin_db: Option<f64>,
}

/// One quantity varied alone.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Sweep {
    /// Which.
    pub quantity: SweepQuantity,
    /// How the addresses are spread in all of its tables.
    pub spacing: Spacing,
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

/// A size and how its addresses are spread.
type Wanted = (LookupSize, Spacing);

/// Depths and finest bits that are tried.
const DEEPEST: usize = DEPTHS[DEPTHS.len() - 1];
const FINEST: u32 = BITS[BITS.len() - 1];

/// Address bits that are tried with straight lines between entries, finest last.
const ADDRESS_BITS: [u32; 10] = [6, 7, 8, 9, 10, 11, 12, 13, 14, 18];

/// Bits of an address as fine as any that is tried; without lines between entries it names the entry.
fn finest_address(depth: usize, between: Between) -> u32 {
    match between {
        Between::Nearest => TableRequest::address_bits_for(depth, between),
        Between::Linear => ADDRESS_BITS[ADDRESS_BITS.len() - 1],
    }
}

/// The request's own spacing first, then the others.
fn spacings(own: Spacing) -> Vec<Spacing> {
    let mut all = vec![own];
    for spacing in [
        Spacing::Magnitude,
        Spacing::Power,
        Spacing::Companded { mu: DEFAULT_MU },
    ] {
        if std::mem::discriminant(&spacing) != std::mem::discriminant(&own) {
            all.push(spacing);
        }
    }
    all
}

struct Search<'a, 'b> {
    trial: Trial<'a, 'b>,
    request: TableRequest,
    reserve: Reserve,
}

impl Search<'_, '_> {
    fn size(&self, depth: usize, amplitude_bits: u32, phase_bits: u32) -> LookupSize {
        LookupSize {
            depth,
            address_bits: finest_address(depth, self.request.between),
            amplitude_bits,
            phase_bits,
        }
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

    fn sweep(
        &mut self,
        quantity: SweepQuantity,
        spacing: Spacing,
        sizes: Vec<LookupSize>,
    ) -> Result<Sweep, StudyError> {
        let wanted: Vec<Wanted> = sizes.into_iter().map(|size| (size, spacing)).collect();
        Ok(Sweep {
            quantity,
            spacing,
            rows: self.trial.rows(&wanted)?,
        })
    }

    /// The depth over every spacing; the one that needs the fewest entries comes first.
    fn depths(&mut self) -> Result<Vec<Sweep>, StudyError> {
        let mut sweeps = Vec::new();
        for spacing in spacings(self.request.spacing) {
            let sizes = DEPTHS.map(|depth| self.size(depth, FINEST, FINEST));
            sweeps.push(self.sweep(SweepQuantity::Depth, spacing, sizes.to_vec())?);
        }
        sweeps.sort_by_key(|sweep| self.bound(&sweep.rows).unwrap_or(usize::MAX));
        Ok(sweeps)
    }

    /// The bits alone, at one spacing.
    fn bits(&mut self, spacing: Spacing) -> Result<Vec<Sweep>, StudyError> {
        let amplitude = BITS.map(|bits| self.size(DEEPEST, bits, FINEST)).to_vec();
        let phase = BITS.map(|bits| self.size(DEEPEST, FINEST, bits)).to_vec();
        let mut sweeps = vec![
            self.sweep(SweepQuantity::AmplitudeBits, spacing, amplitude)?,
            self.sweep(SweepQuantity::PhaseBits, spacing, phase)?,
        ];
        if self.request.between == Between::Linear {
            let finest = self.size(DEEPEST, FINEST, FINEST);
            let address = ADDRESS_BITS.map(|address_bits| LookupSize {
                address_bits,
                ..finest
            });
            sweeps.push(self.sweep(SweepQuantity::AddressBits, spacing, address.to_vec())?);
        }
        Ok(sweeps)
    }

    /// Sizes from the bounds upwards, in the order of the bits they store, then of the address.
    fn beyond(&self, bounds: &[usize]) -> Vec<LookupSize> {
        let steps = |all: usize, from: usize| from..all.min(from + BEYOND + 1);
        let mut sizes = Vec::new();
        for depth in steps(DEPTHS.len(), bounds[0]) {
            for amplitude in steps(BITS.len(), bounds[1]) {
                for phase in steps(BITS.len(), bounds[2]) {
                    let size = self.size(DEPTHS[depth], BITS[amplitude], BITS[phase]);
                    match bounds.get(3) {
                        None => sizes.push(size),
                        Some(&bound) => {
                            sizes.extend(steps(ADDRESS_BITS.len(), bound).map(|index| {
                                LookupSize {
                                    address_bits: ADDRESS_BITS[index],
                                    ..size
                                }
                            }));
                        }
                    }
                }
            }
        }
        sizes.sort_by_key(|size| (size.stored_bits(), size.address_bits));
        sizes
    }
}

/// Searches sizes and spacing of `request`; its interpolation stays. `threads` tables are tried at a time.
pub(super) fn search(
    bench: &Bench<'_>,
    request: &TableRequest,
    reserve: Reserve,
    source: &mut dyn Source,
    threads: usize,
    tick: &mut dyn FnMut(f64),
) -> Result<SearchResult, StudyError> {
    let mut search = Search {
        trial: Trial::new(bench, *request, source, threads, tick)?,
        request: *request,
        reserve,
    };
    let mut sweeps = search.depths()?;
    let best = sweeps
        .first()
        .map_or(request.spacing, |sweep| sweep.spacing);
    let bits = search.bits(best)?;
    let bounds: Option<Vec<usize>> = sweeps
        .iter()
        .take(1)
        .chain(&bits)
        .map(|sweep| search.bound(&sweep.rows))
        .collect();
    sweeps.extend(bits);
    let mut combined = Vec::new();
    let mut found = None;
    if let Some(bounds) = bounds {
        let sizes = search.beyond(&bounds);
        // Tried a few at a time; what stands behind the first that keeps the reserve does not count.
        for several in sizes.chunks(search.trial.at_once()) {
            let wanted: Vec<Wanted> = several.iter().map(|&size| (size, best)).collect();
            for row in search.trial.rows(&wanted)? {
                combined.push(row);
                if search.keeps(&row) {
                    found = Some(row);
                    break;
                }
            }
            if found.is_some() {
                break;
            }
        }
    }
    let margin = |row: &SearchRow| row.margin_db.unwrap_or(f64::NEG_INFINITY);
    let (row, end) = match found {
        Some(row) => (Some(row), SearchEnd::Found),
        None => (
            sweeps
                .iter()
                .flat_map(|sweep| &sweep.rows)
                .chain(&combined)
                .max_by(|a, b| margin(a).total_cmp(&margin(b)))
                .copied(),
            SearchEnd::OutOfReach,
        ),
    };
    Ok(SearchResult {
        reserve,
        sweeps,
        combined,
        table: row.map_or(*request, |row| TableRequest {
            size: row.size,
            spacing: row.spacing,
            ..*request
        }),
        end,
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::signal::Samples;
    use crate::study::{BuiltIn, DEFAULT_STUDY, Study};
    use num_complex::Complex64;

    /// The same tables in the same order with the same margins, however many are tried at a time.
    #[test]
    fn any_number_of_threads_finds_the_same() {
        let mut study = Study::read(DEFAULT_STUDY, &BuiltIn).unwrap();
        study.predistort = None;
        study.limits.sets.clear();
        study.limits.evm_percent = Some(0.6);
        let samples: Vec<_> = (0..1500)
            .map(|n| {
                let t = f64::from(n);
                0.5 * (Complex64::cis(0.31 * t) + 0.9 * Complex64::cis(-0.22 * t + 0.3))
            })
            .collect();
        let found = |threads| {
            let mut source = Samples::new(100e3, samples.clone());
            let bench = Bench::new(&study, &mut source).unwrap();
            let request = TableRequest {
                rate: 2,
                ..TableRequest::default()
            };
            let reserve = Reserve { db: 0.5 };
            search(&bench, &request, reserve, &mut source, threads, &mut |_| {}).unwrap()
        };
        let one = found(1);
        assert_eq!(one, found(3));
        assert_eq!(one.sweeps.len(), 6);
    }
}
