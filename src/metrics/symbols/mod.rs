//! Errors of symbols, where the signal's format is known.
//!
//! **EVM of symbols** `= 100 rms(z / g - s) / rms(s)` in percent: `z` are the received points after the matched
//! filter (single carrier) or the transform (OFDM), `s` the points that were sent, of unit mean power over the
//! constellation, and `g` the least-squares complex gain, one for a single carrier and one for each carrier of
//! OFDM. Frequency offset, timing and clock are taken off by least squares first. Sent points are those that
//! the reference shows at the same instants; without one they are the nearest of the constellation, so that
//! errors past half the distance of neighbours are counted too small.

mod carrier;
mod decide;
mod figures;
mod format;
mod ofdm;

pub use carrier::carrier_symbols;
pub use decide::nearest_point;
pub use figures::{SymbolError, SymbolFigures};
pub use format::{MODULATIONS, SymbolFormat};
pub use ofdm::ofdm_symbols;

use crate::signal::Source;

/// Errors of the symbols of `capture`; `reference` is the sent signal on the same time grid, sample by sample.
///
/// # Errors
/// [`SymbolError`].
pub fn symbol_errors(
    format: &SymbolFormat,
    capture: &mut dyn Source,
    reference: Option<&mut dyn Source>,
) -> Result<SymbolFigures, SymbolError> {
    match format {
        SymbolFormat::SingleCarrier {
            modulation,
            symbol_rate_hz,
            rolloff,
        } => carrier_symbols((*modulation, *symbol_rate_hz, *rolloff), capture, reference),
        SymbolFormat::Ofdm(shape) => ofdm_symbols(shape, capture, reference),
    }
}
