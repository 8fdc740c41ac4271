//! The meters of one stream, and what is read from it before them.

use num_complex::Complex64;

use super::MeasureRequest;
use crate::limits::Limits;
use crate::math::Window;
use crate::metrics::{
    AdjacentChannel, ChannelFilter, EnvelopeMeter, Hold, Spectrum, SpectrumMeter, SpectrumPlan,
    adjacent_channels,
};
use crate::signal::Source;
use crate::study::error::StudyError;
use crate::study::result::SignalFacts;
use crate::verdict::Wanted;

/// Resolution of the spectrum where neither limits nor the user ask for one, as a part of the rate.
const DEFAULT_RESOLUTION: f64 = 1.0 / 1024.0;

/// Meters of one stream.
pub(in crate::study) struct Meters {
    pub(in crate::study) fine: SpectrumMeter,
    pub(in crate::study) peaks: Vec<SpectrumMeter>,
    pub(in crate::study) envelope: EnvelopeMeter,
}

impl Meters {
    pub(in crate::study) fn new(
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

    pub(in crate::study) fn push(&mut self, samples: &[Complex64]) {
        self.fine.push(samples);
        for meter in &mut self.peaks {
            meter.push(samples);
        }
        self.envelope.push(samples);
    }
}

/// Multiplies every density.
pub(in crate::study) fn scale(spectrum: &mut Spectrum, factor: f64) {
    let peak = spectrum.peak_w_per_hz.iter_mut().flatten();
    for density in spectrum.mean_w_per_hz.iter_mut().chain(peak) {
        *density *= factor;
    }
}

/// Where no limit asks for neighbours: two equal channels to each side, where the channel's width is known.
pub(in crate::study) fn default_acpr(limits: &Limits, spectrum: &Spectrum) -> Vec<AdjacentChannel> {
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
pub(in crate::study) fn facts(
    file: &str,
    source: &mut dyn Source,
) -> Result<SignalFacts, StudyError> {
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
