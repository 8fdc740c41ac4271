//! Single carrier: symbols through a root-raised-cosine filter.

use std::f64::consts::{FRAC_PI_4, PI, SQRT_2};

use num_complex::Complex64;
use rand::Rng;
use serde::Serialize;

use super::SignalError;
use super::modulation::Modulation;
use super::recipe::{self, Ends};

/// A linearly modulated carrier.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct SingleCarrier {
    /// How bits become points.
    pub modulation: Modulation,
    /// Symbols a second, Hz.
    pub symbol_rate_hz: f64,
    /// Excess bandwidth of the filter, 0 to 1: the signal occupies `(1 + rolloff) * symbol_rate`.
    pub rolloff: f64,
    /// Samples a symbol; the sample rate is this times the symbol rate.
    pub oversampling: usize,
    /// Length of the filter in symbols, even. Cutting it off leaves a floor beside the channel and
    /// some intersymbol interference. For a roll-off of 0.35, 8 samples a symbol, of the filter
    /// alone (NumPy 2.4.6): span 16: power in the next channel -59 dB, interference after the matched
    /// filter -51 dB; 32: -73, -59; 64: -85, -74; 128: -99, -83. A smaller roll-off needs more.
    pub span: usize,
    /// Number of symbols.
    pub symbols: usize,
    /// What happens at the ends.
    pub ends: Ends,
}

impl SingleCarrier {
    /// Samples a second, Hz.
    pub fn rate_hz(&self) -> f64 {
        self.symbol_rate_hz * self.oversampling as f64
    }

    /// The sample at which symbol 0 is centred; symbol `k` is centred `k * oversampling` later.
    pub fn first_symbol(&self) -> usize {
        match self.ends {
            Ends::Periodic => 0,
            Ends::Open => self.span / 2 * self.oversampling,
        }
    }

    /// The points that [`super::make`] sends for this seed, unit mean power, before the filter.
    pub fn points(&self, seed: u64) -> Vec<Complex64> {
        self.draw(&mut recipe::random(seed))
    }

    fn draw(&self, random: &mut impl Rng) -> Vec<Complex64> {
        self.modulation.draw(self.symbols, random)
    }

    /// Checks the parameters; returns the number of samples.
    pub(super) fn check(&self) -> Result<usize, SignalError> {
        recipe::positive("symbol rate", self.symbol_rate_hz)?;
        recipe::within("roll-off", self.rolloff, 0.0, 1.0)?;
        recipe::at_least("samples a symbol", self.oversampling, 2)?;
        recipe::at_least("symbols", self.symbols, 1)?;
        if self.span < 2 || !self.span.is_multiple_of(2) || self.span > 4096 {
            return Err(recipe::refuse(
                "span in symbols",
                self.span,
                "an even number, 2 to 4096",
            ));
        }
        if self.modulation == Modulation::Pi4Dqpsk
            && self.ends == Ends::Periodic
            && !self.symbols.is_multiple_of(2)
        {
            return Err(recipe::refuse(
                "symbols",
                self.symbols,
                "an even number, because pi/4-DQPSK alternates between two sets of points and must close on itself",
            ));
        }
        let symbols = match self.ends {
            Ends::Periodic => Some(self.symbols),
            Ends::Open => self.symbols.checked_add(self.span),
        };
        recipe::length(symbols.and_then(|symbols| symbols.checked_mul(self.oversampling)))
    }

    /// The unscaled samples.
    pub(super) fn make(&self, random: &mut impl Rng) -> Result<Vec<Complex64>, SignalError> {
        let length = self.check()?;
        let points = self.draw(random);
        let half = self.span / 2 * self.oversampling;
        let taps: Vec<f64> = (0..=2 * half)
            .map(|n| {
                let symbols = (n as f64 - half as f64) / self.oversampling as f64;
                root_raised_cosine(symbols, self.rolloff)
            })
            .collect();
        let mut out = vec![Complex64::ZERO; length];
        for (k, point) in points.iter().enumerate() {
            // Tap `n` of symbol `k` falls on sample `k * oversampling + n`, less `half` where periodic.
            let start = match self.ends {
                Ends::Open => k * self.oversampling,
                Ends::Periodic => {
                    let laps = half.div_ceil(length);
                    (k * self.oversampling + laps * length - half) % length
                }
            };
            let mut at = start;
            for tap in &taps {
                if at == length {
                    at = 0;
                }
                out[at] += point * tap;
                at += 1;
            }
        }
        Ok(out)
    }
}

/// Root-raised-cosine impulse response at `t` symbols from its centre, unit energy a symbol:
///
/// `h(t) = (sin(pi t (1-a)) + 4 a t cos(pi t (1+a))) / (pi t (1 - (4 a t)^2))`,
/// `h(0) = 1 - a + 4 a / pi`,
/// `h(+-1/(4a)) = a/sqrt(2) ((1 + 2/pi) sin(pi/(4a)) + (1 - 2/pi) cos(pi/(4a)))`.
///
/// The textbook form (J. G. Proakis, "Digital Communications"), recalled from memory; the tests hold
/// it against the raised cosine that it makes when it is applied twice. Beside a singular point the
/// limit is used where the formula would lose more than half its digits: an error of 1e-8 at most.
pub fn root_raised_cosine(t: f64, rolloff: f64) -> f64 {
    const NEAR: f64 = 1.5e-8;
    let a = rolloff;
    if t.abs() < NEAR {
        return 1.0 - a + 4.0 * a / PI;
    }
    let pole = 1.0 - (4.0 * a * t).powi(2);
    if pole.abs() < NEAR {
        let (sin, cos) = (FRAC_PI_4 / a).sin_cos();
        return a / SQRT_2 * ((1.0 + 2.0 / PI) * sin + (1.0 - 2.0 / PI) * cos);
    }
    ((PI * t * (1.0 - a)).sin() + 4.0 * a * t * (PI * t * (1.0 + a)).cos()) / (PI * t * pole)
}
