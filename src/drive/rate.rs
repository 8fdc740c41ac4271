//! How finely a track must be sampled.

use super::Scheme;

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
    /// Pulses that are quantized or switched.
    Edges,
    /// The rate of the bursts.
    Bursts,
    /// The band-pass behind the stage.
    Filter,
    /// Two branches of constant magnitude are far wider than the signal.
    Branches,
    /// The rate of the schemes that it is compared with.
    Common,
    /// The rate of a table or polynomial in front.
    Predistortion,
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
            Self::Edges => "steps of the pulses or rails",
            Self::Bursts => "the rate of the bursts",
            Self::Filter => "the filter behind the stage",
            Self::Branches => "branches of constant magnitude are far wider than the signal",
            Self::Common => "the schemes that it is compared with",
            Self::Predistortion => "the rate of the predistortion",
        }
    }
}

/// A bandwidth past this many times the signal's rate is transparent to it and asks for nothing more.
const TRANSPARENT: f64 = 8.0;

/// The rate that a bandwidth asks for, Hz.
pub(super) fn band(bandwidth_hz: Option<f64>, signal_rate_hz: f64) -> f64 {
    4.0 * bandwidth_hz
        .unwrap_or(0.0)
        .min(TRANSPARENT * signal_rate_hz)
}

/// The factor by which a signal of `signal_rate_hz` must be oversampled for `scheme`, a power of two, and why.
/// `span_hz` is the whole range from the lowest to the highest offset that limits ask for, 0 for none.
///
/// Common practice, checked afterwards against half of it: eight times the signal's rate for the width of
/// its magnitude and phase, four times every bandwidth that is not far wider than the signal, four times
/// every tone and converter, and a quarter more than the span.
pub fn oversampling(scheme: &Scheme, signal_rate_hz: f64, span_hz: f64) -> (usize, RateReason) {
    let mut wanted = (8.0 * signal_rate_hz, RateReason::PolarExpansion);
    let mut ask = |rate_hz: f64, reason: RateReason| {
        if rate_hz > wanted.0 {
            wanted = (rate_hz, reason);
        }
    };
    ask(1.25 * span_hz, RateReason::LimitsSpan);
    for (rate_hz, reason) in scheme.rates(signal_rate_hz) {
        ask(rate_hz, reason);
    }
    let factor = (wanted.0 / signal_rate_hz).log2().ceil().clamp(0.0, 30.0);
    ((1usize << factor as u32).min(MAX_FACTOR), wanted.1)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::drive::{Modulator, PhasePath, Ripple, Shape, Shaping, SupplyScheme};

    fn factor(modulator: Modulator, span_hz: f64) -> (usize, RateReason) {
        let scheme = Scheme::Supply(SupplyScheme {
            shaping: Shaping {
                shape: Shape::Corner,
                floor: 0.0,
            },
            modulator,
            phase_path: PhasePath::default(),
        });
        oversampling(&scheme, 1e6, span_hz)
    }

    #[test]
    fn the_widest_imperfection_decides() {
        let ideal = Modulator::default();
        assert_eq!(factor(ideal.clone(), 0.0), (8, RateReason::PolarExpansion));
        assert_eq!(factor(ideal.clone(), 20e6), (32, RateReason::LimitsSpan));
        let band = Modulator {
            bandwidth_hz: Some(5e6),
            ..ideal.clone()
        };
        assert_eq!(factor(band, 0.0), (32, RateReason::ModulatorBandwidth));
        let wide = Modulator {
            bandwidth_hz: Some(1e12),
            ..ideal.clone()
        };
        assert_eq!(factor(wide, 0.0), (32, RateReason::ModulatorBandwidth));
        let ripple = Some(Ripple {
            amplitude_v: 0.1,
            frequency_hz: 1e12,
        });
        assert_eq!(
            factor(Modulator { ripple, ..ideal }, 0.0),
            (MAX_FACTOR, RateReason::Ripple)
        );
    }
}
