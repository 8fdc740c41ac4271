//! Points of OFDM with a cyclic prefix: symbols found by the prefix, carriers equalized one by one.

mod equalize;
mod windows;

use super::decide::nearest_point;
use super::figures::{Recovered, SymbolError, SymbolFigures};
use crate::signal::{Ofdm, Source};
use crate::units::db;

use equalize::{ROUNDS, carrier_gains, decide, refine};
use windows::{OVER, at_symbol_rate, found, transformed};

/// Errors of the points of `capture`. Sent points are decided on `reference` at the same instants where there
/// is one.
///
/// The prefix gives start and frequency (J. J. van de Beek, M. Sandell, P. O. Börjesson, "ML estimation of
/// time and frequency offset in OFDM systems", IEEE Trans. Signal Process., July 1997): offsets up to half
/// the carriers' spacing. The transform's window starts in the middle of what is left of the prefix after its
/// faded edge. Frequency and clock are refined by lines through the phases of the decided points over symbols and
/// carriers; no phase is taken off symbol by symbol. Each carrier is divided by its own least-squares gain over
/// all symbols.
///
/// # Errors
/// [`SymbolError`].
pub fn ofdm_symbols(
    shape: &Ofdm,
    capture: &mut dyn Source,
    reference: Option<&mut dyn Source>,
) -> Result<SymbolFigures, SymbolError> {
    let carriers = shape.offsets().len();
    let mut samples = at_symbol_rate(shape, capture)?;
    let (sent, first) = match reference {
        Some(reference) => {
            let mut clean = at_symbol_rate(shape, reference)?;
            clean.truncate(samples.len());
            samples.truncate(clean.len());
            let windows = found(shape, &mut clean)?;
            (Some(decide(shape, &windows)?.sent), Some(windows.first))
        }
        None => (None, None),
    };
    let windows = match first {
        // The capture is on the reference's grid already.
        Some(first) => transformed(shape, &samples, first, 0.0),
        None => found(shape, &mut samples)?,
    };
    let fitted = match &sent {
        Some(sent) => refine(shape, &windows.points, sent).ok_or(SymbolError::Lost)?,
        None => decide(shape, &windows)?,
    };
    let sent_from = if sent.is_some() {
        "reference"
    } else {
        "decided"
    };
    let (mut points, mut sent, mut gains) =
        (fitted.points, sent.unwrap_or(fitted.sent), Vec::new());
    for _ in 0..ROUNDS {
        gains = carrier_gains(&points, &sent, carriers);
        if sent_from == "reference" {
            break;
        }
        for (row, decided) in points
            .chunks_exact(carriers)
            .zip(sent.chunks_exact_mut(carriers))
        {
            for ((y, s), gain) in row.iter().zip(decided).zip(&gains) {
                *s = nearest_point(shape.modulation, 0, y / gain);
            }
        }
    }
    for row in points.chunks_exact_mut(carriers) {
        row.iter_mut().zip(&gains).for_each(|(y, gain)| *y /= gain);
    }
    let rate_hz = shape.spacing_hz * (OVER * shape.fft_size) as f64;
    let mut figures = SymbolFigures::of(
        &points,
        &sent,
        carriers,
        Recovered {
            frequency_hz: (windows.cycles + fitted.cycles) * rate_hz,
            clock_error: fitted.clock,
            first_s: (windows.first + OVER * shape.prefix) as f64 / rate_hz,
            sent_from,
        },
    );
    let mean = gains.iter().map(|gain| gain.norm_sqr()).sum::<f64>() / carriers as f64;
    figures.carrier_gain_db = (carriers <= 4096).then(|| {
        gains
            .iter()
            .map(|gain| db(gain.norm_sqr() / mean))
            .collect()
    });
    Ok(figures)
}
