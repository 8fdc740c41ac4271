//! The options of a polynomial.

use crate::cli::Failure;
use crate::predistort::{COEFFICIENT_BITS, Form, PolynomialRequest, PolynomialSize};

#[derive(Debug, clap::Args)]
pub(super) struct PolynomialOptions {
    /// Learn a polynomial with memory as well and hold it against the table
    #[arg(long, value_enum, value_name = "FORM")]
    polynomial: Option<FormWord>,

    /// Highest power of the envelope; with --lags, or both chosen by cross-validation
    #[arg(long, value_name = "K", requires_all = ["polynomial", "lags"], value_parser = clap::value_parser!(u32).range(0..=PolynomialSize::HIGHEST.0 as i64))]
    power: Option<u32>,

    /// Longest lag of the signal, samples at --rate
    #[arg(long, value_name = "M", requires_all = ["polynomial", "power"], value_parser = clap::value_parser!(u32).range(0..=PolynomialSize::HIGHEST.1 as i64))]
    lags: Option<u32>,

    /// Farthest cross term, samples at --rate
    #[arg(long, value_name = "L", requires = "power", default_value_t = 1, value_parser = clap::value_parser!(u32).range(1..=PolynomialSize::HIGHEST.2 as i64))]
    cross: u32,

    /// Most passes of learning
    #[arg(long, value_name = "N", default_value_t = 6, value_parser = clap::value_parser!(u32).range(1..=50))]
    passes: u32,

    /// Bits of each part of a coefficient, one exponent for all [default: the fewest that cost less than 0.05 dB]
    #[arg(long, value_name = "BITS", requires = "polynomial", value_parser = clap::value_parser!(u32).range(i64::from(COEFFICIENT_BITS.0)..=i64::from(COEFFICIENT_BITS.1)))]
    coefficient_bits: Option<u32>,

    /// Ridge of the least squares, against columns of norm one; 0 for none
    #[arg(long, value_name = "R", default_value_t = 1e-11)]
    ridge: f64,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
enum FormWord {
    /// Signal and envelope lag alike
    Memory,
    /// Cross terms of signal and envelope as well
    Cross,
}

impl PolynomialOptions {
    /// What they ask for, at `rate` times the signal's rate.
    pub(super) fn request(&self, rate: usize) -> Result<Option<PolynomialRequest>, Failure> {
        if !(self.ridge >= 0.0 && self.ridge.is_finite()) {
            return Err(Failure::new(format!(
                "--ridge {}: 0 or more is allowed",
                self.ridge
            )));
        }
        Ok(self.polynomial.map(|word| {
            let form = match word {
                FormWord::Memory => Form::Memory,
                FormWord::Cross => Form::Cross,
            };
            let size = self
                .power
                .zip(self.lags)
                .map(|(power, lags)| PolynomialSize {
                    form,
                    power,
                    memory: lags as usize,
                    cross: self.cross as usize,
                });
            PolynomialRequest {
                form,
                size,
                passes: self.passes as usize,
                ridge: self.ridge,
                rate,
                coefficient_bits: self.coefficient_bits,
            }
        }))
    }
}
