//! Errors of symbols as numbers.

use num_complex::Complex64;
use serde::Serialize;

use crate::signal::SignalError;

/// Points kept for pictures.
const MOST_POINTS: usize = 20_000;

/// Values of a list in a document, at most; longer ones are left out.
const MOST_LISTED: usize = 4096;

/// Why symbols cannot be read.
#[derive(Debug, thiserror::Error)]
pub enum SymbolError {
    /// The samples cannot be read.
    #[error(transparent)]
    Signal(#[from] SignalError),
    /// The stated format cannot be that of this signal.
    #[error("the stated format does not fit: {0}")]
    Format(String),
    /// Too few symbols.
    #[error("{given} symbols: at least {needed} are needed to recover timing, phase and gain")]
    TooFew {
        /// Symbols there are.
        given: u64,
        /// Symbols needed.
        needed: u64,
    },
    /// No gain, phase or timing fits.
    #[error("no timing and phase makes points of these samples: is the format stated rightly?")]
    Lost,
}

/// How far received symbols are from the sent ones.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SymbolFigures {
    /// RMS error over the RMS of the sent points, percent.
    pub evm_percent: f64,
    /// Largest error of any point, percent.
    pub evm_peak_percent: f64,
    /// Error that 95 % of the points do not exceed, percent.
    pub evm_p95_percent: f64,
    /// Error that 99 % of the points do not exceed, percent.
    pub evm_p99_percent: f64,
    /// Symbols (of OFDM: with all their carriers).
    pub symbols: u64,
    /// Points compared.
    pub points: u64,
    /// Frequency offset that was taken off here, Hz.
    pub frequency_hz: f64,
    /// How much faster the sender's clock runs than the samples say, as a part of one.
    pub clock_error: f64,
    /// Instant of the first symbol compared (of OFDM: of its useful part), s.
    pub first_s: f64,
    /// Where the sent points came from: `reference` or `decided`.
    pub sent_from: &'static str,
    /// RMS error of each symbol of OFDM over its carriers, percent. Absent for more than 4096 and for a single
    /// carrier.
    pub per_symbol_percent: Option<Vec<f64>>,
    /// RMS error of each carrier over its symbols, percent, lowest carrier first.
    pub per_carrier_percent: Option<Vec<f64>>,
    /// Gain of each carrier against their mean, dB.
    pub carrier_gain_db: Option<Vec<f64>>,
    /// Some received points over their gain.
    #[serde(skip)]
    pub constellation: Vec<Complex64>,
}

/// Where the numbers of a recovery go in [`SymbolFigures`].
pub(super) struct Recovered {
    pub(super) frequency_hz: f64,
    pub(super) clock_error: f64,
    pub(super) first_s: f64,
    pub(super) sent_from: &'static str,
}

impl SymbolFigures {
    /// From received points over their gain and the sent ones, carrier by carrier within each symbol.
    pub(super) fn of(
        received: &[Complex64],
        sent: &[Complex64],
        carriers: usize,
        recovered: Recovered,
    ) -> Self {
        let mean_square = sent.iter().map(|s| s.norm_sqr()).sum::<f64>() / sent.len() as f64;
        let percent = |square: f64| 100.0 * (square / mean_square).sqrt();
        let mut squares: Vec<f64> = received
            .iter()
            .zip(sent)
            .map(|(z, s)| (z - s).norm_sqr())
            .collect();
        let count = squares.len();
        let total: f64 = squares.iter().sum();
        let (mut per_symbol, mut per_carrier) = (None, None);
        if carriers > 1 {
            let symbols = count / carriers;
            if symbols <= MOST_LISTED {
                per_symbol = Some(
                    squares
                        .chunks_exact(carriers)
                        .map(|row| percent(row.iter().sum::<f64>() / carriers as f64))
                        .collect(),
                );
            }
            if carriers <= MOST_LISTED {
                let mut sums = vec![0.0; carriers];
                for row in squares.chunks_exact(carriers) {
                    sums.iter_mut().zip(row).for_each(|(sum, e)| *sum += e);
                }
                per_carrier = Some(
                    sums.iter()
                        .map(|sum| percent(sum / symbols as f64))
                        .collect(),
                );
            }
        }
        squares.sort_by(f64::total_cmp);
        // The smallest error that at least this part of the points does not exceed.
        let quantile = |part: f64| {
            let rank = (part * count as f64).ceil() as usize;
            percent(squares[rank.clamp(1, count) - 1])
        };
        let stride = count.div_ceil(MOST_POINTS).max(1);
        Self {
            evm_percent: percent(total / count as f64),
            evm_peak_percent: quantile(1.0),
            evm_p95_percent: quantile(0.95),
            evm_p99_percent: quantile(0.99),
            symbols: (count / carriers) as u64,
            points: count as u64,
            frequency_hz: recovered.frequency_hz,
            clock_error: recovered.clock_error,
            first_s: recovered.first_s,
            sent_from: recovered.sent_from,
            per_symbol_percent: per_symbol,
            per_carrier_percent: per_carrier,
            carrier_gain_db: None,
            constellation: received.iter().step_by(stride).copied().collect(),
        }
    }
}
