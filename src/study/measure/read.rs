//! From the meters of one stream to spectra in watts and margins.

use super::MeasureRequest;
use super::meters::{Meters, scale};
use crate::metrics::{EnvelopeFigures, Spectrum, SpectrumMeter};
use crate::study::error::StudyError;
use crate::study::scale::judge_without_scale;
use crate::verdict::{Judgement, Measured, judge};

/// The errors to be judged, where they are known.
#[derive(Debug, Clone, Copy, Default)]
pub(in crate::study) struct ErrorsRead {
    pub(in crate::study) evm_percent: Option<f64>,
    pub(in crate::study) evm_peak_percent: Option<f64>,
    pub(in crate::study) evm_p95_percent: Option<f64>,
    pub(in crate::study) evm_p99_percent: Option<f64>,
}

/// What was read.
#[derive(Debug, Clone)]
pub(in crate::study) struct Read {
    pub(in crate::study) spectrum: Spectrum,
    pub(in crate::study) peak_spectra: Vec<Spectrum>,
    pub(in crate::study) envelope: EnvelopeFigures,
    pub(in crate::study) judgement: Judgement,
    /// Of the file's own unit.
    pub(in crate::study) mean_square: f64,
    /// Watts a squared unit, where the scale is known.
    pub(in crate::study) factor: Option<f64>,
}

pub(in crate::study) fn read(
    meters: Meters,
    request: &MeasureRequest,
    errors: ErrorsRead,
) -> Result<Read, StudyError> {
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
        evm_percent: errors.evm_percent,
        evm_peak_percent: errors.evm_peak_percent,
        evm_p95_percent: errors.evm_p95_percent,
        evm_p99_percent: errors.evm_p99_percent,
        modulation: None,
        harmonics_dbc: None,
        stress: None,
    };
    let judgement = match factor {
        Some(_) => judge(&measured, &request.limits),
        None => judge_without_scale(&measured, &request.limits),
    };
    Ok(Read {
        spectrum,
        peak_spectra,
        envelope,
        judgement,
        mean_square,
        factor,
    })
}
