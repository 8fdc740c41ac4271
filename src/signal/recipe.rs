//! A test signal as plain data, and its making.

use std::fmt::Display;

use num_complex::Complex64;
use rand::SeedableRng;
use rand_chacha::ChaCha12Rng;
use serde::Serialize;

use super::ofdm::Ofdm;
use super::shaping::SingleCarrier;
use super::tones::{Noise, Ramp, Tones};
use super::{Samples, SignalError};

/// The longest signal that is made: it is held in memory, 16 bytes a sample.
pub const MOST_SAMPLES: usize = 1 << 25;

/// What happens at the ends of a signal.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Ends {
    /// It begins and stops.
    Open,
    /// The last sample leads into the first: an averaged spectrum or an EVM sees no ends.
    Periodic,
}

/// What to make.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
#[serde(tag = "kind", rename_all = "kebab-case")]
pub enum Kind {
    /// Symbols through a root-raised-cosine filter.
    SingleCarrier(SingleCarrier),
    /// Many narrow carriers with a cyclic prefix.
    Ofdm(Ofdm),
    /// Two or more tones.
    Tones(Tones),
    /// Band-limited Gaussian noise.
    Noise(Noise),
    /// A rising magnitude.
    Ramp(Ramp),
}

/// A test signal: everything but the seed.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Recipe {
    /// What to make.
    #[serde(flatten)]
    pub kind: Kind,
    /// The largest magnitude of the result, full scale 1.0.
    pub peak: f64,
}

impl Recipe {
    /// `kind` with its peak at full scale.
    pub fn new(kind: Kind) -> Self {
        Self { kind, peak: 1.0 }
    }

    /// Samples a second of the result, Hz.
    pub fn rate_hz(&self) -> f64 {
        match &self.kind {
            Kind::SingleCarrier(carrier) => carrier.rate_hz(),
            Kind::Ofdm(ofdm) => ofdm.rate_hz(),
            Kind::Tones(tones) => tones.rate_hz,
            Kind::Noise(noise) => noise.rate_hz,
            Kind::Ramp(ramp) => ramp.rate_hz,
        }
    }

    /// Checks all parameters without making anything; returns the number of samples.
    ///
    /// # Errors
    /// A parameter that is not allowed, or a signal of more than [`MOST_SAMPLES`].
    pub fn check(&self) -> Result<usize, SignalError> {
        within("peak", self.peak, f64::MIN_POSITIVE, 1.0)?;
        let length = match &self.kind {
            Kind::SingleCarrier(carrier) => carrier.check(),
            Kind::Ofdm(ofdm) => ofdm.check(),
            Kind::Tones(tones) => tones.check(),
            Kind::Noise(noise) => noise.check(),
            Kind::Ramp(ramp) => ramp.check(),
        }?;
        positive("sample rate", self.rate_hz())?;
        Ok(length)
    }
}

/// Makes the signal, scaled so that its largest magnitude is `recipe.peak`. The same recipe and seed
/// give the same samples always (ChaCha with 12 rounds, seeded by the number's 8 bytes).
///
/// # Errors
/// As [`Recipe::check`].
pub fn make(recipe: &Recipe, seed: u64) -> Result<Samples, SignalError> {
    recipe.check()?;
    let mut random = random(seed);
    let mut samples = match &recipe.kind {
        Kind::SingleCarrier(carrier) => carrier.make(&mut random),
        Kind::Ofdm(ofdm) => ofdm.make(&mut random),
        Kind::Tones(tones) => tones.make(&mut random),
        Kind::Noise(noise) => noise.make(&mut random),
        Kind::Ramp(ramp) => ramp.make(),
    }?;
    let peak = samples
        .iter()
        .map(Complex64::norm_sqr)
        .fold(0.0, f64::max)
        .sqrt();
    let gain = recipe.peak / peak;
    if !gain.is_finite() {
        return Err(refuse(
            "signal",
            "samples that are all zero",
            "at least one sample to scale to the peak",
        ));
    }
    for sample in &mut samples {
        *sample *= gain;
    }
    Ok(Samples::new(recipe.rate_hz(), samples))
}

/// The random numbers of a seed.
pub(super) fn random(seed: u64) -> ChaCha12Rng {
    let mut bytes = [0; 32];
    bytes[..8].copy_from_slice(&seed.to_le_bytes());
    ChaCha12Rng::from_seed(bytes)
}

pub(super) fn refuse(
    parameter: &'static str,
    given: impl Display,
    allowed: impl Into<String>,
) -> SignalError {
    SignalError::Recipe {
        parameter,
        given: given.to_string(),
        allowed: allowed.into(),
    }
}

pub(super) fn positive(parameter: &'static str, value: f64) -> Result<(), SignalError> {
    if value.is_finite() && value > 0.0 {
        Ok(())
    } else {
        Err(refuse(parameter, value, "a finite number above 0"))
    }
}

pub(super) fn within(
    parameter: &'static str,
    value: f64,
    low: f64,
    high: f64,
) -> Result<(), SignalError> {
    if (low..=high).contains(&value) {
        Ok(())
    } else if low == f64::MIN_POSITIVE {
        Err(refuse(
            parameter,
            value,
            format!("above 0 and at most {high}"),
        ))
    } else {
        Err(refuse(parameter, value, format!("{low} to {high}")))
    }
}

pub(super) fn at_least(
    parameter: &'static str,
    value: usize,
    low: usize,
) -> Result<(), SignalError> {
    if value >= low {
        Ok(())
    } else {
        Err(refuse(parameter, value, format!("{low} or more")))
    }
}

/// The number of samples, where it can be held.
pub(super) fn length(samples: Option<usize>) -> Result<usize, SignalError> {
    match samples {
        Some(samples @ 1..=MOST_SAMPLES) => Ok(samples),
        Some(samples) => Err(refuse("samples", samples, format!("1 to {MOST_SAMPLES}"))),
        None => Err(refuse(
            "samples",
            "more than can be counted",
            format!("1 to {MOST_SAMPLES}"),
        )),
    }
}
