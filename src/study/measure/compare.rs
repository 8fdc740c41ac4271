//! A capture and its reference, sample by sample.

use super::MeasureRequest;
use super::meters::Meters;
use crate::metrics::{
    Alignment, Bend, BendMeter, EnvelopeFigures, ErrorFigures, ErrorMeter, MemoryFit, MemoryMeter,
    PairReader, Reference, Repeat, Spectrum, SymbolFigures, Sync, occupied_bandwidth,
    symbol_errors,
};
use crate::signal::{Samples, Source};
use crate::study::average::{Averaged, average};
use crate::study::error::StudyError;
use crate::study::result::SignalFacts;
use crate::verdict::Wanted;

/// Samples whose symbols are compared with a reference, at most: 64 MB for each of the two.
const MOST_SYMBOL_SAMPLES: usize = 1 << 22;

/// What the pass over both streams found.
pub(super) struct Compared {
    pub(super) sync: Sync,
    pub(super) errors: ErrorFigures,
    pub(super) bend: Option<Bend>,
    pub(super) memory: Option<MemoryFit>,
    pub(super) spectrum: Spectrum,
    pub(super) envelope: EnvelopeFigures,
    pub(super) averaged: Option<Averaged>,
    pub(super) symbols: Option<SymbolFigures>,
}

pub(super) fn compare(
    request: &MeasureRequest,
    wanted: &Wanted,
    capture: &mut dyn Source,
    signal: &SignalFacts,
    reference: &mut dyn Source,
    sent: &SignalFacts,
    sync: Sync,
) -> Result<(Meters, Compared), StudyError> {
    let rate_hz = signal.rate_hz;
    let count = sync.to - sync.from;
    let mut meters = Meters::new(request, wanted, rate_hz, count)?;
    let mut sent_meter = Meters::new(request, &Wanted::default(), rate_hz, count)?;
    // Past 0.92 of the lower rate the interpolation is no longer right.
    let lower_hz = rate_hz.min(sent.rate_hz);
    let band_hz = request
        .band_hz
        .or(request.limits.channel_hz)
        .or(request.limits.authorized_bandwidth_hz)
        .unwrap_or(0.9 * lower_hz)
        .min(rate_hz);
    let alignment = Alignment {
        delay_s: 0.0,
        gain: sync.gain,
        correlation: sync.correlation,
        samples: count,
    };
    let mut errors = ErrorMeter::new(alignment, rate_hz, Some(band_hz))?;
    let mut bend = BendMeter::new(1.1 * sent.peak, sync.gain, count);
    let looped = is_looped(request.repeat, sent, signal);
    let mut memory = MemoryMeter::new(count);
    let mut again = Reference::again(reference, sent.samples, looped, rate_hz);
    let mut reader = PairReader::of(capture, &mut again, &sync)?;
    let (mut x, mut y) = (Vec::new(), Vec::new());
    let mut kept = [Vec::new(), Vec::new()];
    while reader.read(&mut x, &mut y)? > 0 {
        if request.format.is_some() && kept[0].len() < MOST_SYMBOL_SAMPLES {
            kept[0].extend_from_slice(&x);
            kept[1].extend_from_slice(&y);
        }
        meters.push(&y);
        sent_meter.push(&x);
        errors.push(&x, &y)?;
        bend.push(&x, &y);
        memory.push(&x, &y);
    }
    drop(reader);
    let symbols = match &request.format {
        None => None,
        Some(format) => {
            let [sent, received] = kept.map(|samples| Samples::new(rate_hz, samples));
            let (mut sent, mut received) = (sent, received);
            Some(symbol_errors(format, &mut received, Some(&mut sent))?)
        }
    };
    let averaged = if looped {
        average(capture, reference, sent, &sync)?
    } else {
        None
    };
    let sent_spectrum = sent_meter.fine.finish()?;
    let occupied = occupied_bandwidth(&sent_spectrum, 0.99)?.width_hz() / rate_hz;
    Ok((
        meters,
        Compared {
            sync,
            errors: errors.finish()?,
            bend: bend.finish(),
            memory: memory.finish(occupied),
            spectrum: sent_spectrum,
            envelope: sent_meter
                .envelope
                .finish()
                .ok_or(StudyError::SilentSignal)?,
            averaged,
            symbols,
        },
    ))
}

/// Whether the reference comes again and again in the capture.
pub(in crate::study) fn is_looped(
    repeat: Repeat,
    sent: &SignalFacts,
    signal: &SignalFacts,
) -> bool {
    match repeat {
        Repeat::Yes => true,
        Repeat::No => false,
        Repeat::Auto => {
            (sent.samples as f64) / sent.rate_hz < 0.999 * signal.samples as f64 / signal.rate_hz
        }
    }
}
