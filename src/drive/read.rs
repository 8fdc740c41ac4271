//! The `[scheme]` table of a study.

use super::{Converter, Modulator, PhasePath, Ripple, Scheme, Shape, Shaping, SupplyScheme};
use crate::input::{Problem, Range, Section};
use crate::math::lowpass::MAX_ORDER;
use crate::units::Dimension;

impl Scheme {
    /// Reads the `[scheme]` table.
    ///
    /// # Errors
    /// The first thing wrong, with its place.
    pub fn read(section: &Section<'_>) -> Result<Self, Problem> {
        let kinds = [("supply", ())];
        if section.maybe_choice("kind", &kinds)?.is_none() {
            return Err(section.problem("kind", "\"supply\""));
        }
        let scheme = Self::Supply(supply(section)?);
        section.finish()?;
        Ok(scheme)
    }
}

const SHAPES: [(&str, Shape); 3] = [
    ("corner", Shape::Corner),
    ("hyperbola", Shape::Hyperbola),
    ("exponential", Shape::Exponential),
];

fn supply(section: &Section<'_>) -> Result<SupplyScheme, Problem> {
    let floor = section
        .maybe_quantity("floor", Dimension::Ratio, Range::Within(0.0, 0.9))?
        .unwrap_or(0.0);
    let shape = section
        .maybe_choice("shaping", &SHAPES)?
        .unwrap_or(Shape::Exponential);
    let modulator = section
        .maybe_section("modulator")?
        .map(|s| modulator(&s))
        .transpose()?;
    let phase_path = section
        .maybe_section("phase_path")?
        .map(|s| phase_path(&s))
        .transpose()?;
    Ok(SupplyScheme {
        shaping: Shaping { shape, floor },
        modulator: modulator.unwrap_or_default(),
        phase_path: phase_path.unwrap_or_default(),
    })
}

fn order(section: &Section<'_>) -> Result<u32, Problem> {
    Ok(section
        .maybe_whole("order", 1, u64::from(MAX_ORDER))?
        .unwrap_or(2) as u32)
}

fn modulator(section: &Section<'_>) -> Result<Modulator, Problem> {
    let bits = section.maybe_whole("bits", 1, 24)?;
    let rate_hz = section.maybe_quantity("sample_rate", Dimension::Frequency, Range::Positive)?;
    let converter = match (bits, rate_hz) {
        (Some(bits), Some(rate_hz)) => Some(Converter {
            bits: bits as u32,
            rate_hz,
        }),
        (None, None) => None,
        (Some(_), None) => {
            return Err(section.problem(
                "sample_rate",
                "the converter's sample rate, beside its bits",
            ));
        }
        (None, Some(_)) => {
            return Err(section.problem("bits", "the converter's bits, beside its sample rate"));
        }
    };
    let ripple = section
        .maybe_section("ripple")?
        .map(|s| ripple(&s))
        .transpose()?;
    let modulator = Modulator {
        bandwidth_hz: section.maybe_quantity("bandwidth", Dimension::Frequency, Range::Positive)?,
        order: order(section)?,
        delay_s: delay(section)?,
        slew_v_per_s: section.maybe_quantity("slew_rate", Dimension::SlewRate, Range::Positive)?,
        converter,
        ripple,
        efficiency: section
            .maybe_quantity("efficiency", Dimension::Ratio, Range::UpTo(0.0, 1.0))?
            .unwrap_or(1.0),
        idle_w: section
            .maybe_quantity("idle", Dimension::Power, Range::NotNegative)?
            .unwrap_or(0.0),
    };
    section.finish()?;
    Ok(modulator)
}

/// Dead times longer than this are no dead times of a transmitter, and their buffers would not fit.
const MAX_DELAY_S: f64 = 1e-3;

fn delay(section: &Section<'_>) -> Result<f64, Problem> {
    let allowed = Range::Within(0.0, MAX_DELAY_S);
    Ok(section
        .maybe_quantity("delay", Dimension::Time, allowed)?
        .unwrap_or(0.0))
}

fn ripple(section: &Section<'_>) -> Result<Ripple, Problem> {
    let ripple = Ripple {
        amplitude_v: section.quantity("amplitude", Dimension::Voltage, Range::NotNegative)?,
        frequency_hz: section.quantity("frequency", Dimension::Frequency, Range::Positive)?,
    };
    section.finish()?;
    Ok(ripple)
}

fn phase_path(section: &Section<'_>) -> Result<PhasePath, Problem> {
    let path = PhasePath {
        delay_s: delay(section)?,
        bandwidth_hz: section.maybe_quantity("bandwidth", Dimension::Frequency, Range::Positive)?,
        order: order(section)?,
    };
    section.finish()?;
    Ok(path)
}
