//! The `[scheme.modulator]` table of a study.

use num_complex::Complex64;

use super::read::{delay, order};
use super::{Converter, Modulator, PoleZero, PowerModel, Ripple};
use crate::input::{Problem, Range, Section};
use crate::math::response::{MAX_POLES, Roots};
use crate::units::Dimension;

pub(super) fn modulator(section: &Section<'_>) -> Result<Modulator, Problem> {
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
    let response = response(section)?;
    if response.is_some() && (section.has("bandwidth") || section.has("order")) {
        return Err(section.problem(
            "bandwidth",
            "either bandwidth and order, or poles and zeros",
        ));
    }
    let power = section
        .maybe_section("power")?
        .map(|s| power(&s))
        .transpose()?
        .unwrap_or_default();
    if matches!(power, PowerModel::Linear { .. }) && section.has("efficiency") {
        return Err(section.problem(
            "efficiency",
            "no efficiency beside a linear regulator: its input and the voltage decide",
        ));
    }
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
        response,
        power,
        output_ohm: section
            .maybe_quantity(
                "output_resistance",
                Dimension::Resistance,
                Range::NotNegative,
            )?
            .unwrap_or(0.0),
    };
    section.finish()?;
    Ok(modulator)
}

#[derive(Debug, Clone, Copy)]
enum Model {
    Switching,
    Linear,
    SplitBand,
}

const MODELS: [(&str, Model); 3] = [
    ("switching", Model::Switching),
    ("linear", Model::Linear),
    ("split_band", Model::SplitBand),
];

fn power(section: &Section<'_>) -> Result<PowerModel, Problem> {
    let Some(model) = section.maybe_choice("model", &MODELS)? else {
        return Err(section.problem("model", "\"switching\", \"linear\" or \"split_band\""));
    };
    let input = || section.quantity("input", Dimension::Voltage, Range::Positive);
    let power = match model {
        Model::Switching => PowerModel::Switching,
        Model::Linear => PowerModel::Linear { input_v: input()? },
        Model::SplitBand => PowerModel::SplitBand {
            input_v: input()?,
            crossover_hz: section.quantity("crossover", Dimension::Frequency, Range::Positive)?,
        },
    };
    section.finish()?;
    Ok(power)
}

/// Which side of the imaginary axis a root may stand on.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Side {
    Left,
    Either,
}

fn response(section: &Section<'_>) -> Result<Option<Box<PoleZero>>, Problem> {
    let list = |key, side| -> Result<Vec<Complex64>, Problem> {
        if !section.has(key) {
            return Ok(Vec::new());
        }
        section
            .sections(key)?
            .iter()
            .map(|root_section| root(root_section, side))
            .collect()
    };
    let (poles, zeros) = (list("poles", Side::Left)?, list("zeros", Side::Either)?);
    if poles.is_empty() {
        if section.has("zeros") {
            return Err(section.problem("poles", "at least as many poles as zeros"));
        }
        return Ok(None);
    }
    let size = |roots: &[Complex64]| -> usize {
        roots
            .iter()
            .map(|root| if root.im > 0.0 { 2 } else { 1 })
            .sum()
    };
    if size(&poles) > MAX_POLES {
        return Err(section.problem(
            "poles",
            format!("at most {MAX_POLES}, both of a pair counted"),
        ));
    }
    if size(&zeros) > size(&poles) {
        return Err(section.problem(
            "zeros",
            "at most as many zeros as poles, both of a pair counted",
        ));
    }
    Ok(Some(Box::new(PoleZero {
        poles: Roots::new(&poles),
        zeros: Roots::new(&zeros),
    })))
}

/// `{ frequency, q }` or `{ re, im }`, rad/s; of a pair that with the imaginary part above zero.
fn root(section: &Section<'_>, side: Side) -> Result<Complex64, Problem> {
    let natural = section.maybe_quantity("frequency", Dimension::Root, Range::Positive)?;
    let q = section.maybe_quantity("q", Dimension::Ratio, Range::Positive)?;
    let re = section.maybe_quantity("re", Dimension::Root, Range::Any)?;
    let im = section
        .maybe_quantity("im", Dimension::Root, Range::Any)?
        .unwrap_or(0.0);
    let either = "either frequency (with q for a pair) or re (with im for a pair)";
    let root = match (natural, re) {
        (Some(natural), None) if !section.has("im") => match q {
            Some(q) if q > 0.5 => {
                let re = -natural / (2.0 * q);
                Complex64::new(re, (natural * natural - re * re).sqrt())
            }
            Some(_) => {
                return Err(section.problem("q", "a q above 0.5; below it two real ones are meant"));
            }
            None => Complex64::new(-natural, 0.0),
        },
        (None, Some(re)) if q.is_none() => Complex64::new(re, im.abs()),
        _ => return Err(section.problem("frequency", either)),
    };
    if side == Side::Left && root.re >= 0.0 {
        return Err(section.problem(
            "re",
            "a pole with a real part below 0: all others are unstable",
        ));
    }
    if root.norm() == 0.0 {
        return Err(section.problem(
            "re",
            "a zero off the origin: the response is 1 at direct current",
        ));
    }
    section.finish()?;
    Ok(root)
}

fn ripple(section: &Section<'_>) -> Result<Ripple, Problem> {
    let ripple = Ripple {
        amplitude_v: section.quantity("amplitude", Dimension::Voltage, Range::NotNegative)?,
        frequency_hz: section.quantity("frequency", Dimension::Frequency, Range::Positive)?,
    };
    section.finish()?;
    Ok(ripple)
}
