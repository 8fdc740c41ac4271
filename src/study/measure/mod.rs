//! A captured signal to its numbers, with or without the signal that was sent.

mod cautions;
mod compare;
mod meters;
mod read;

use num_complex::Complex64;

use super::average::Averaged;
use super::error::StudyError;
use super::result::SignalFacts;
use super::scale::Scale;
use crate::limits::Limits;
use crate::math::Window;
use crate::metrics::{
    AdjacentChannel, Bend, EnvelopeFigures, MemoryFit, Repeat, Spectrum, SymbolFigures,
    SymbolFormat, Sync, occupied_bandwidth, symbol_errors, synchronize,
};
use crate::signal::Source;
use crate::units::dbm_from_watt;
use crate::verdict::{Judgement, MaskMargin, Wanted};

use cautions::cautions;
use compare::compare;
use meters::default_acpr;

pub(super) use compare::is_looped;
pub(super) use meters::{Meters, facts, scale};
pub(super) use read::{ErrorsRead, Read, read};

/// Samples a block.
const BLOCK: usize = 1 << 14;

/// What is asked of a capture.
#[derive(Debug, Clone)]
pub struct MeasureRequest {
    /// As the user named it.
    pub file: String,
    /// The sent signal, as the user named it.
    pub reference: Option<String>,
    /// Whether the sent signal was sent over and over.
    pub repeat: Repeat,
    /// What the capture is held against.
    pub limits: Limits,
    /// What one of the file's units is.
    pub scale: Scale,
    /// Window of the mean spectrum.
    pub window: Window,
    /// Resolution that the user wants, Hz.
    pub resolution_hz: Option<f64>,
    /// The signal's format, where it is known.
    pub format: Option<SymbolFormat>,
    /// Full width in which the EVM is taken, Hz; by the limits' channel, else all of the lower rate.
    pub band_hz: Option<f64>,
}

/// A capture measured.
#[derive(Debug, Clone)]
pub struct MeasureResult {
    /// What was asked.
    pub request: MeasureRequest,
    /// The capture as it was found.
    pub signal: SignalFacts,
    /// The reference as it was found.
    pub reference: Option<SignalFacts>,
    /// How they lie against each other.
    pub sync: Option<Sync>,
    /// The numbers.
    pub metrics: CaptureMetrics,
    /// The numbers against the limits.
    pub judgement: Judgement,
    /// Mean spectrum of the capture, W/Hz where the scale is known, else against full scale squared.
    pub spectrum: Spectrum,
    /// Mean spectrum of the reference at the capture's gain.
    pub reference_spectrum: Option<Spectrum>,
    /// Peak-hold spectra, where limits ask for them.
    pub peak_spectra: Vec<Spectrum>,
    /// Powers of the capture.
    pub envelope: EnvelopeFigures,
    /// Powers of the reference.
    pub reference_envelope: Option<EnvelopeFigures>,
    /// Amplitude and phase over the reference's amplitude.
    pub bend: Option<Bend>,
    /// How much of what the capture does beyond one gain is bend, and how much memory.
    pub memory: Option<MemoryFit>,
    /// The mean of all periods against the reference.
    pub averaged: Option<Averaged>,
    /// Errors of symbols, where the format is known.
    pub symbols: Option<SymbolFigures>,
    /// What limits how far this can be trusted.
    pub warnings: Vec<String>,
}

/// The numbers, named as in the machine-readable contract. What needs a reference or a scale is absent
/// without.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct CaptureMetrics {
    /// Mean power.
    pub power_dbm: Option<f64>,
    /// Peak envelope power.
    pub peak_power_dbm: Option<f64>,
    /// Mean power against a carrier of constant magnitude 1.0, dB.
    pub power_dbfs: f64,
    /// Peak over mean.
    pub papr_db: f64,
    /// Levels above the mean that the power exceeds for 10 %, 1 %, 0.1 % and 0.01 % of the time, dB.
    pub ccdf_db: [Option<f64>; 4],
    /// Width that holds 99 % of the power.
    pub occupied_hz: f64,
    /// Middle of that width, Hz from offset 0.
    pub occupied_centre_hz: f64,
    /// RMS error: of symbols where their format is known, else of the waveform in the band.
    pub evm_percent: Option<f64>,
    /// Largest error of the same.
    pub evm_peak_percent: Option<f64>,
    /// Error that 95 % of the symbols do not exceed.
    pub evm_p95_percent: Option<f64>,
    /// What the three are of: `symbols` or `waveform`.
    pub evm_of: Option<&'static str>,
    /// RMS error of the waveform in the band.
    pub waveform_evm_percent: Option<f64>,
    /// The band of the waveform's, full width.
    pub evm_band_hz: Option<f64>,
    /// Mean square error in all of the sampled band.
    pub nmse_db: Option<f64>,
    /// Neighbouring channels.
    pub acpr: Vec<AdjacentChannel>,
    /// Every mask segment's tightest point.
    pub mask: Vec<MaskMargin>,
    /// Always absent: a capture does not tell what was drawn.
    pub efficiency: Option<f64>,
}

/// Measures `capture`, against `reference` where there is one.
///
/// `progress` is told now and then which part of the work is done, 0 to 1.
///
/// # Errors
/// [`StudyError`] where the numbers cannot be had.
pub fn measure(
    request: &MeasureRequest,
    capture: &mut dyn Source,
    reference: Option<&mut dyn Source>,
    progress: &mut dyn FnMut(f64),
) -> Result<MeasureResult, StudyError> {
    let signal = facts(&request.file, capture)?;
    progress(0.1);
    let wanted = Wanted::of(&request.limits);
    let rate_hz = signal.rate_hz;
    let (meters, compared, reference_facts) = match reference {
        None => {
            let mut meters = Meters::new(request, &wanted, rate_hz, signal.samples)?;
            capture.rewind()?;
            let mut block = vec![Complex64::ZERO; BLOCK];
            loop {
                let count = capture.read(&mut block)?;
                if count == 0 {
                    break;
                }
                meters.push(&block[..count]);
            }
            (meters, None, None)
        }
        Some(reference) => {
            let name = request.reference.as_deref().unwrap_or("reference");
            let sent = facts(name, reference)?;
            let sync = synchronize(capture, reference, request.repeat)?;
            progress(0.5);
            let (meters, compared) =
                compare(request, &wanted, capture, &signal, reference, &sent, sync)?;
            (meters, Some(compared), Some(sent))
        }
    };
    progress(0.9);
    let symbols = match (&request.format, &compared) {
        (None, _) => None,
        (Some(_), Some(compared)) => compared.symbols.clone(),
        (Some(format), None) => Some(symbol_errors(format, capture, None)?),
    };
    let waveform = compared.as_ref().map(|c| c.errors);
    let evm_percent = match &symbols {
        Some(symbols) => Some(symbols.evm_percent),
        None => waveform.map(|errors| errors.evm_percent),
    };
    let evm_peak_percent = match &symbols {
        Some(symbols) => Some(symbols.evm_peak_percent),
        None => waveform.map(|errors| errors.evm_peak_percent),
    };
    let Read {
        spectrum,
        peak_spectra,
        envelope,
        judgement,
        mean_square,
        factor,
    } = read(
        meters,
        request,
        ErrorsRead {
            evm_percent,
            evm_peak_percent,
            evm_p95_percent: symbols.as_ref().map(|s| s.evm_p95_percent),
            evm_p99_percent: symbols.as_ref().map(|s| s.evm_p99_percent),
        },
    )?;
    let occupied = occupied_bandwidth(&spectrum, 0.99)?;
    let acpr = if judgement.acpr.is_empty() {
        default_acpr(&request.limits, &spectrum)
    } else {
        judgement.acpr.clone()
    };
    let metrics = CaptureMetrics {
        power_dbm: factor.map(|_| dbm_from_watt(envelope.mean_w)),
        peak_power_dbm: factor.map(|_| dbm_from_watt(envelope.peak_w)),
        power_dbfs: crate::units::db(mean_square),
        papr_db: envelope.papr_db,
        ccdf_db: [0.1, 0.01, 1e-3, 1e-4].map(|part| {
            (part * envelope.samples as f64 >= 1.0)
                .then(|| envelope.quantile_db(part))
                .flatten()
        }),
        occupied_hz: occupied.width_hz(),
        occupied_centre_hz: (occupied.from_hz + occupied.to_hz) / 2.0,
        evm_percent,
        evm_peak_percent,
        evm_p95_percent: symbols.as_ref().map(|s| s.evm_p95_percent),
        evm_of: match (&symbols, &waveform) {
            (Some(_), _) => Some("symbols"),
            (None, Some(_)) => Some("waveform"),
            (None, None) => None,
        },
        waveform_evm_percent: waveform.map(|errors| errors.evm_percent),
        evm_band_hz: compared.as_ref().and_then(|c| c.errors.band_hz),
        nmse_db: compared
            .as_ref()
            .map(|c| c.errors.nmse_db)
            .filter(|nmse| nmse.is_finite()),
        acpr,
        mask: judgement.mask.clone(),
        efficiency: None,
    };
    let warnings = cautions(
        &signal,
        &metrics,
        spectrum.segments,
        compared.as_ref().map(|compared| &compared.sync),
        &judgement,
    );
    let (mut reference_spectrum, mut reference_envelope) = (None, None);
    let (mut sync, mut bend, mut averaged, mut memory) = (None, None, None, None);
    if let Some(compared) = compared {
        let mut sent = compared.spectrum;
        scale(
            &mut sent,
            factor.unwrap_or(1.0) * compared.sync.gain.norm_sqr(),
        );
        reference_spectrum = Some(sent);
        reference_envelope = Some(compared.envelope);
        (sync, bend, averaged) = (Some(compared.sync), compared.bend, compared.averaged);
        memory = compared.memory;
    }
    progress(1.0);
    Ok(MeasureResult {
        request: request.clone(),
        signal,
        reference: reference_facts,
        sync,
        metrics,
        judgement,
        spectrum,
        reference_spectrum,
        peak_spectra,
        envelope,
        reference_envelope,
        bend,
        memory,
        averaged,
        symbols,
        warnings,
    })
}
