//! The format of a signal, as the user states it.

use serde::Serialize;

use crate::input::{Problem, Range, Section};
use crate::signal::{Centre, Ends, Modulation, Ofdm};
use crate::units::Dimension;

/// What is known of a signal's format.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
#[serde(rename_all = "snake_case", tag = "kind")]
pub enum SymbolFormat {
    /// Symbols through a root-raised-cosine filter.
    SingleCarrier {
        /// How bits become points.
        modulation: Modulation,
        /// Symbols a second, Hz.
        symbol_rate_hz: f64,
        /// Excess bandwidth, above 0 to 1.
        rolloff: f64,
    },
    /// Many narrow carriers with a cyclic prefix. Number of symbols, oversampling and ends say nothing here.
    Ofdm(Ofdm),
}

/// Names of modulations in settings.
pub const MODULATIONS: [(&str, Modulation); 5] = [
    ("qpsk", Modulation::Qpsk),
    ("pi4-dqpsk", Modulation::Pi4Dqpsk),
    ("psk8", Modulation::Psk8),
    ("qam16", Modulation::Qam16),
    ("qam64", Modulation::Qam64),
];

#[derive(Clone, Copy)]
enum Kind {
    SingleCarrier,
    Ofdm,
}

impl SymbolFormat {
    /// Reads the table `[signal.format]` of a study: `kind` is `single_carrier` (with `modulation`,
    /// `symbol_rate`, `rolloff`) or `ofdm` (with `modulation`, `spacing`, `fft`, `carriers`, `prefix`, and
    /// optional `edge` and `centre`).
    ///
    /// # Errors
    /// A value that is not allowed, with its place.
    pub fn read(section: &Section<'_>) -> Result<Self, Problem> {
        let kinds = [
            ("single_carrier", Kind::SingleCarrier),
            ("ofdm", Kind::Ofdm),
        ];
        let kind = section
            .maybe_choice("kind", &kinds)?
            .ok_or_else(|| section.problem("kind", "single_carrier or ofdm"))?;
        let modulation = section
            .maybe_choice("modulation", &MODULATIONS)?
            .ok_or_else(|| {
                section.problem("modulation", "qpsk, pi4-dqpsk, psk8, qam16 or qam64")
            })?;
        let whole = |key: &'static str, low: usize, high: usize| {
            section
                .maybe_quantity(
                    key,
                    Dimension::Ratio,
                    Range::Between(low as f64, high as f64),
                )?
                .filter(|value| value.fract() == 0.0)
                .map(|value| value as usize)
                .ok_or_else(|| section.problem(key, format!("a whole number, {low} to {high}")))
        };
        let format = match kind {
            Kind::SingleCarrier => Self::SingleCarrier {
                modulation,
                symbol_rate_hz: section.quantity(
                    "symbol_rate",
                    Dimension::Frequency,
                    Range::Positive,
                )?,
                rolloff: section.quantity("rolloff", Dimension::Ratio, Range::UpTo(0.0, 1.0))?,
            },
            Kind::Ofdm => Self::Ofdm(Ofdm {
                modulation,
                spacing_hz: section.quantity("spacing", Dimension::Frequency, Range::Positive)?,
                fft_size: whole("fft", 4, 1 << 16)?,
                carriers: whole("carriers", 1, 1 << 16)?,
                centre: section
                    .maybe_choice(
                        "centre",
                        &[("empty", Centre::Empty), ("used", Centre::Used)],
                    )?
                    .unwrap_or(Centre::Empty),
                prefix: whole("prefix", 1, 1 << 16)?,
                edge: if section.has("edge") {
                    whole("edge", 0, 1 << 16)?
                } else {
                    0
                },
                oversampling: 1,
                symbols: 1,
                ends: Ends::Open,
            }),
        };
        section.finish()?;
        format
            .check()
            .map_err(|text| section.problem("kind", text))?;
        Ok(format)
    }

    /// Refuses numbers that no signal has; says what is allowed.
    ///
    /// # Errors
    /// What is wrong, in words.
    pub fn check(&self) -> Result<(), String> {
        match self {
            Self::SingleCarrier {
                symbol_rate_hz,
                rolloff,
                ..
            } => {
                if !(*symbol_rate_hz > 0.0 && symbol_rate_hz.is_finite()) {
                    return Err("a symbol rate above 0 Hz".to_owned());
                }
                if !(*rolloff >= 0.02 && *rolloff <= 1.0) {
                    return Err("a roll-off of 0.02 to 1".to_owned());
                }
            }
            Self::Ofdm(shape) => {
                shape.format_problem().map_or(Ok(()), Err)?;
                if shape.prefix == 0 {
                    return Err(
                        "a cyclic prefix of at least 1 sample, by which symbols are found"
                            .to_owned(),
                    );
                }
                if shape.fft_size > 1 << 16 {
                    return Err("an FFT size of at most 65536".to_owned());
                }
            }
        }
        Ok(())
    }

    /// How points are made of bits.
    pub fn modulation(&self) -> Modulation {
        match self {
            Self::SingleCarrier { modulation, .. } => *modulation,
            Self::Ofdm(shape) => shape.modulation,
        }
    }
}
