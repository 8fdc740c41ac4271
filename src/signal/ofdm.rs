//! OFDM with a cyclic prefix.

use std::f64::consts::PI;

use num_complex::Complex64;
use rand::Rng;
use rustfft::FftPlanner;
use serde::Serialize;

use super::SignalError;
use super::modulation::Modulation;
use super::recipe::{self, Ends};

/// Whether the carrier at offset 0 is used.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Centre {
    /// Left empty, as radios with carrier leakage do.
    Empty,
    /// Carries data like the others.
    Used,
}

/// Many narrow carriers. Lengths in samples count at the rate `spacing * fft_size`, before oversampling.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Ofdm {
    /// How bits become points; not differential.
    pub modulation: Modulation,
    /// Distance between carriers, Hz: one over the useful symbol's length.
    pub spacing_hz: f64,
    /// Samples of the useful symbol.
    pub fft_size: usize,
    /// Carriers with data, centred on offset 0.
    pub carriers: usize,
    /// Whether the carrier at offset 0 is used.
    pub centre: Centre,
    /// Samples of the cyclic prefix.
    pub prefix: usize,
    /// Samples of the raised-cosine edge in which a symbol fades into the next; at most the prefix.
    /// The edge eats the first samples of the prefix. 0: hard edges.
    pub edge: usize,
    /// Samples out for one sample of the lengths above.
    pub oversampling: usize,
    /// Number of OFDM symbols.
    pub symbols: usize,
    /// What happens at the ends.
    pub ends: Ends,
}

impl Ofdm {
    /// Samples a second, Hz.
    pub fn rate_hz(&self) -> f64 {
        self.spacing_hz * self.fft_size as f64 * self.oversampling as f64
    }

    /// Offsets of the carriers with data in units of the spacing, lowest first. An even number with
    /// the centre used, or an odd one without, has its odd carrier below the centre.
    pub fn offsets(&self) -> Vec<i64> {
        let count = self.carriers as i64;
        match self.centre {
            Centre::Used => (-(count / 2)..count - count / 2).collect(),
            Centre::Empty => (-(count - count / 2)..=count / 2)
                .filter(|offset| *offset != 0)
                .collect(),
        }
    }

    /// The sample at which the useful part of symbol 0 begins (after its prefix).
    pub fn first_useful(&self) -> usize {
        self.prefix * self.oversampling
    }

    /// Samples from one symbol to the next.
    pub fn symbol_samples(&self) -> usize {
        (self.fft_size + self.prefix) * self.oversampling
    }

    /// The points that [`super::make`] sends for this seed: one list a symbol, in the order of
    /// [`Ofdm::offsets`], unit mean power.
    pub fn points(&self, seed: u64) -> Vec<Vec<Complex64>> {
        let mut random = recipe::random(seed);
        (0..self.symbols)
            .map(|_| self.modulation.draw(self.carriers, &mut random))
            .collect()
    }

    /// What is wrong with the parameters that describe the format, in words; nothing where they can be.
    pub fn format_problem(&self) -> Option<String> {
        let one = Self {
            oversampling: 1,
            symbols: 1,
            ..*self
        };
        one.check().err().map(|error| error.to_string())
    }

    /// Checks the parameters; returns the number of samples.
    pub(super) fn check(&self) -> Result<usize, SignalError> {
        recipe::positive("carrier spacing", self.spacing_hz)?;
        recipe::at_least("oversampling", self.oversampling, 1)?;
        recipe::at_least("symbols", self.symbols, 1)?;
        if !(2..=1 << 20).contains(&self.fft_size) {
            return Err(recipe::refuse("FFT size", self.fft_size, "2 to 1048576"));
        }
        let most = match self.centre {
            Centre::Used => self.fft_size,
            Centre::Empty => self.fft_size - 1,
        };
        if !(1..=most).contains(&self.carriers) {
            return Err(recipe::refuse(
                "active carriers",
                self.carriers,
                format!("1 to {most}, as many as the FFT has beside an empty centre"),
            ));
        }
        if self.modulation == Modulation::Pi4Dqpsk {
            return Err(recipe::refuse(
                "modulation",
                "pi/4-DQPSK",
                "qpsk, psk8, qam16 or qam64 on the carriers of OFDM",
            ));
        }
        if self.prefix > self.fft_size {
            return Err(recipe::refuse(
                "cyclic prefix",
                self.prefix,
                "at most the FFT size",
            ));
        }
        if self.edge > self.prefix {
            return Err(recipe::refuse(
                "edge window",
                self.edge,
                "at most the cyclic prefix, or neighbouring symbols would disturb each other",
            ));
        }
        let tail = match self.ends {
            Ends::Periodic => 0,
            Ends::Open => self.edge,
        };
        recipe::length(
            self.symbols
                .checked_mul(self.fft_size + self.prefix)
                .and_then(|samples| samples.checked_add(tail))
                .and_then(|samples| samples.checked_mul(self.oversampling)),
        )
    }

    /// The unscaled samples: `x(n) = sum_k c_k exp(j 2 pi k n / N)` over each symbol, extended
    /// cyclically by the prefix before and the edge after, faded in and out, and added.
    pub(super) fn make(&self, random: &mut impl Rng) -> Result<Vec<Complex64>, SignalError> {
        let length = self.check()?;
        let size = self.fft_size * self.oversampling;
        let (prefix, edge) = (
            self.prefix * self.oversampling,
            self.edge * self.oversampling,
        );
        let transform = FftPlanner::new().plan_fft_inverse(size);
        let mut scratch = vec![Complex64::ZERO; transform.get_inplace_scratch_len()];
        let mut useful = vec![Complex64::ZERO; size];
        let bins: Vec<usize> = self
            .offsets()
            .iter()
            .map(|offset| offset.rem_euclid(size as i64) as usize)
            .collect();
        // Rising half of the raised cosine at the middles of the samples: rise and fall add to 1.
        let rise: Vec<f64> = (0..edge)
            .map(|n| (0.5 * PI * (n as f64 + 0.5) / edge as f64).sin().powi(2))
            .collect();

        let mut out = vec![Complex64::ZERO; length];
        for symbol in 0..self.symbols {
            useful.fill(Complex64::ZERO);
            let points = self.modulation.draw(self.carriers, random);
            for (bin, point) in bins.iter().zip(points) {
                useful[*bin] = point;
            }
            transform.process_with_scratch(&mut useful, &mut scratch);
            let start = symbol * (size + prefix);
            for n in 0..prefix + size + edge {
                let fade = if n < edge {
                    rise[n]
                } else if n >= prefix + size {
                    rise[edge - 1 - (n - prefix - size)]
                } else {
                    1.0
                };
                out[(start + n) % length] += useful[(n + size - prefix) % size] * fade;
            }
        }
        Ok(out)
    }
}
