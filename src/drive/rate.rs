//! How finely a track must be sampled.

use super::{Scheme, SupplyScheme};

/// The highest oversampling factor.
pub const MAX_FACTOR: usize = 512;

/// What asked for the highest rate.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum RateReason {
    /// Magnitude and phase are wider than the signal.
    PolarExpansion,
    /// The farthest offset that a limit asks for.
    LimitsSpan,
    /// The modulator's bandwidth.
    ModulatorBandwidth,
    /// The phase path's bandwidth.
    PhaseBandwidth,
    /// The converter's rate.
    Converter,
    /// The ripple's frequency.
    Ripple,
}

impl RateReason {
    /// In words.
    pub fn text(self) -> &'static str {
        match self {
            Self::PolarExpansion => "magnitude and phase are wider than the signal",
            Self::LimitsSpan => "the farthest offset of the limits",
            Self::ModulatorBandwidth => "the modulator's bandwidth",
            Self::PhaseBandwidth => "the phase path's bandwidth",
            Self::Converter => "the converter's rate",
            Self::Ripple => "the ripple's frequency",
        }
    }
}

/// The factor by which a signal of `signal_rate_hz` must be oversampled for `scheme`, a power of two, and why.
/// `span_hz` is the whole range from the lowest to the highest offset that limits ask for, 0 for none.
///
/// Common practice, checked afterwards by doubling: eight times the signal's rate for the width of its
/// magnitude and phase, ten times every bandwidth, eight times every tone and converter, and a quarter more
/// than the span.
pub fn oversampling(scheme: &Scheme, signal_rate_hz: f64, span_hz: f64) -> (usize, RateReason) {
    let Scheme::Supply(SupplyScheme {
        modulator,
        phase_path,
        ..
    }) = scheme;
    let mut wanted = (8.0 * signal_rate_hz, RateReason::PolarExpansion);
    let mut ask = |rate_hz: f64, reason: RateReason| {
        if rate_hz > wanted.0 {
            wanted = (rate_hz, reason);
        }
    };
    ask(1.25 * span_hz, RateReason::LimitsSpan);
    ask(
        10.0 * modulator.bandwidth_hz.unwrap_or(0.0),
        RateReason::ModulatorBandwidth,
    );
    ask(
        10.0 * phase_path.bandwidth_hz.unwrap_or(0.0),
        RateReason::PhaseBandwidth,
    );
    ask(
        8.0 * modulator.converter.map_or(0.0, |c| c.rate_hz),
        RateReason::Converter,
    );
    ask(
        8.0 * modulator.ripple.map_or(0.0, |r| r.frequency_hz),
        RateReason::Ripple,
    );
    let factor = (wanted.0 / signal_rate_hz).log2().ceil().clamp(0.0, 30.0);
    ((1usize << factor as u32).min(MAX_FACTOR), wanted.1)
}
