//! A captured signal to its numbers, with or without the signal that was sent.

use num_complex::Complex64;

use super::error::StudyError;
use super::result::SignalFacts;
use crate::limits::Limits;
use crate::math::Window;
use crate::metrics::{
    AdjacentChannel, Alignment, Bend, BendMeter, ChannelFilter, EnvelopeFigures, EnvelopeMeter,
    ErrorFigures, ErrorMeter, Hold, PairReader, Reference, Repeat, Spectrum, SpectrumMeter,
    SpectrumPlan, SymbolFigures, SymbolFormat, Sync, adjacent_channels, occupied_bandwidth,
    symbol_errors, synchronize,
};
use crate::signal::{Samples, Source};
use crate::units::dbm_from_watt;
use crate::verdict::{Judgement, MaskMargin, Measured, Wanted, judge};

use super::average::{Averaged, average};
use super::scale::{Scale, judge_without_scale};

/// Samples a block.
const BLOCK: usize = 1 << 14;

/// Resolution of the spectrum where neither limits nor the user ask for one, as a part of the rate.
const DEFAULT_RESOLUTION: f64 = 1.0 / 1024.0;

/// Samples whose symbols are compared with a reference, at most: 64 MB for each of the two.
const MOST_SYMBOL_SAMPLES: usize = 1 << 22;

/// Fewer segments than this are worth a warning.
const FEW_SEGMENTS: u64 = 25;

/// A correlation below this is worth a warning.
const WEAK: f64 = 0.7;

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

/// Meters of one stream.
struct Meters {
    fine: SpectrumMeter,
    peaks: Vec<SpectrumMeter>,
    envelope: EnvelopeMeter,
}

impl Meters {
    fn new(
        request: &MeasureRequest,
        wanted: &Wanted,
        rate_hz: f64,
        samples: u64,
    ) -> Result<Self, StudyError> {
        let resolution_hz = [wanted.fine_resolution_hz, request.resolution_hz]
            .into_iter()
            .flatten()
            .reduce(f64::min)
            .unwrap_or_else(|| {
                // Short captures are read more coarsely rather than refused.
                let by_length = 16.0 * rate_hz / samples as f64;
                (DEFAULT_RESOLUTION * rate_hz).max(by_length)
            });
        // |x|^2 itself: a load of 1/2.
        let meter = |resolution_hz, window, hold| {
            let plan = SpectrumPlan::for_resolution(rate_hz, resolution_hz, window, hold)?;
            if samples < plan.length as u64 {
                return Err(StudyError::CaptureTooShort {
                    given: samples,
                    needed: plan.length as u64,
                    resolution_hz,
                });
            }
            Ok(SpectrumMeter::new(plan, rate_hz, 0.5)?)
        };
        Ok(Self {
            fine: meter(resolution_hz, request.window, Hold::None)?,
            peaks: wanted
                .peak_hold_resolutions_hz
                .iter()
                .map(|&resolution_hz| meter(resolution_hz, Window::FlatTop, Hold::Peak))
                .collect::<Result<_, StudyError>>()?,
            envelope: EnvelopeMeter::new(0.5),
        })
    }

    fn push(&mut self, samples: &[Complex64]) {
        self.fine.push(samples);
        for meter in &mut self.peaks {
            meter.push(samples);
        }
        self.envelope.push(samples);
    }
}

/// What the pass over both streams found.
struct Compared {
    sync: Sync,
    errors: ErrorFigures,
    bend: Option<Bend>,
    spectrum: Spectrum,
    envelope: EnvelopeFigures,
    averaged: Option<Averaged>,
    symbols: Option<SymbolFigures>,
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
    let mut warnings = Vec::new();
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
    let factor = request.scale.watts_a_unit();
    let mut spectrum = meters.fine.finish()?;
    let mut peak_spectra: Vec<Spectrum> = meters
        .peaks
        .into_iter()
        .map(SpectrumMeter::finish)
        .collect::<Result<_, _>>()?;
    let mut envelope = meters.envelope.finish().ok_or(StudyError::SilentSignal)?;
    let mean_square = envelope.mean_w;
    let factor_used = factor.unwrap_or(1.0);
    scale(&mut spectrum, factor_used);
    peak_spectra
        .iter_mut()
        .for_each(|spectrum| scale(spectrum, factor_used));
    envelope.mean_w *= factor_used;
    envelope.peak_w *= factor_used;
    let measured = Measured {
        fine: &spectrum,
        peak_hold: &peak_spectra,
        mean_w: envelope.mean_w,
        peak_w: envelope.peak_w,
        evm_percent,
        evm_peak_percent,
        evm_p95_percent: symbols.as_ref().map(|s| s.evm_p95_percent),
        evm_p99_percent: symbols.as_ref().map(|s| s.evm_p99_percent),
        modulation: None,
        harmonics_dbc: None,
        stress: None,
    };
    let judgement = match factor {
        Some(_) => judge(&measured, &request.limits),
        None => judge_without_scale(&measured, &request.limits),
    };
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
    if spectrum.segments < FEW_SEGMENTS {
        warnings.push(format!(
            "the spectrum averages only {} segments, so that each reading is uncertain by about {:.1} dB: use a longer capture",
            spectrum.segments,
            4.34 / (spectrum.segments as f64).sqrt()
        ));
    }
    // A carrier beside the middle of the emission moves every offset.
    if compared.is_none() && metrics.occupied_centre_hz.abs() > 0.05 * metrics.occupied_hz {
        warnings.push(format!(
            "the emission is centred {} from offset 0: masks and channels are read around offset 0 all the same. Give the sent signal with --reference, and its frequency offset is taken off",
            crate::units::show(metrics.occupied_centre_hz, "Hz", 4)
        ));
    }
    if signal.peak >= 0.9999 && signal.peak <= 1.0 {
        warnings.push("the capture reaches full scale: its receiver may have clipped".to_owned());
    }
    if let Some(compared) = &compared {
        let sync = &compared.sync;
        if sync.correlation < WEAK {
            warnings.push(format!(
                "the capture follows its reference weakly, with a correlation of {:.2}: noise, or another signal",
                sync.correlation
            ));
        }
        if sync.to - sync.from < signal.samples * 19 / 20 {
            warnings.push(format!(
                "only samples {} to {} of the capture's {} follow the reference: every number is of these",
                sync.from, sync.to, signal.samples
            ));
        }
    }
    warnings.extend(judgement.warnings.iter().cloned());
    let (mut reference_spectrum, mut reference_envelope) = (None, None);
    let (mut sync, mut bend, mut averaged) = (None, None, None);
    if let Some(compared) = compared {
        let mut sent = compared.spectrum;
        scale(&mut sent, factor_used * compared.sync.gain.norm_sqr());
        reference_spectrum = Some(sent);
        reference_envelope = Some(compared.envelope);
        (sync, bend, averaged) = (Some(compared.sync), compared.bend, compared.averaged);
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
        averaged,
        symbols,
        warnings,
    })
}

fn compare(
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
    let looped = match request.repeat {
        Repeat::Yes => true,
        Repeat::No => false,
        Repeat::Auto => {
            (sent.samples as f64) / sent.rate_hz < 0.999 * signal.samples as f64 / rate_hz
        }
    };
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
    Ok((
        meters,
        Compared {
            sync,
            errors: errors.finish()?,
            bend: bend.finish(),
            spectrum: sent_meter.fine.finish()?,
            envelope: sent_meter
                .envelope
                .finish()
                .ok_or(StudyError::SilentSignal)?,
            averaged,
            symbols,
        },
    ))
}

fn scale(spectrum: &mut Spectrum, factor: f64) {
    let peak = spectrum.peak_w_per_hz.iter_mut().flatten();
    for density in spectrum.mean_w_per_hz.iter_mut().chain(peak) {
        *density *= factor;
    }
}

/// Where no limit asks for neighbours: two equal channels to each side, where the channel's width is known.
fn default_acpr(limits: &Limits, spectrum: &Spectrum) -> Vec<AdjacentChannel> {
    let Some(bandwidth_hz) = limits.channel_hz.or(limits.authorized_bandwidth_hz) else {
        return Vec::new();
    };
    let filter = ChannelFilter::Flat { bandwidth_hz };
    let neighbours = [(bandwidth_hz, filter), (2.0 * bandwidth_hz, filter)];
    for count in [2, 1] {
        if let Ok(rows) = adjacent_channels(spectrum, &filter, &neighbours[..count]) {
            return rows;
        }
    }
    Vec::new()
}

/// Reads a signal once: its length may not be known before, and its level must be.
fn facts(file: &str, source: &mut dyn Source) -> Result<SignalFacts, StudyError> {
    source.rewind()?;
    let levels = crate::signal::Levels::of_source(source)?;
    if levels.peak.is_nan() || levels.peak <= 0.0 {
        return Err(StudyError::SilentSignal);
    }
    let rate_hz = source.rate_hz();
    Ok(SignalFacts {
        file: file.to_owned(),
        rate_hz,
        samples: levels.samples,
        duration_s: levels.samples as f64 / rate_hz,
        peak: levels.peak,
        rms: levels.rms,
    })
}
