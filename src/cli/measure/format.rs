//! The options of a known format.

use crate::cli::Failure;
use crate::cli::arguments::quantity;
use crate::metrics::SymbolFormat;
use crate::metrics::symbols::MODULATIONS;
use crate::signal::{Centre, Ends, Modulation, Ofdm};
use crate::units::Dimension;

/// The signal's format, where it is known.
#[derive(Debug, clap::Args)]
#[command(next_help_heading = "Known format (EVM of symbols)")]
pub(super) struct SymbolOptions {
    /// Modulation: with --symbol-rate a single carrier, with --spacing OFDM
    #[arg(long, value_name = "NAME", value_parser = modulation)]
    modulation: Option<Modulation>,

    /// Symbols a second of a single carrier
    #[arg(long, value_name = "HZ", value_parser = quantity(Dimension::Frequency), requires = "modulation")]
    symbol_rate: Option<f64>,

    /// Roll-off of its root-raised-cosine filter
    #[arg(long, value_parser = quantity(Dimension::Ratio), requires = "symbol_rate")]
    rolloff: Option<f64>,

    /// Distance between carriers of OFDM
    #[arg(long, value_name = "HZ", value_parser = quantity(Dimension::Frequency), requires_all = ["modulation", "fft", "carriers", "prefix"], conflicts_with = "symbol_rate")]
    spacing: Option<f64>,

    /// FFT size of OFDM
    #[arg(long, requires = "spacing")]
    fft: Option<usize>,

    /// Carriers with data
    #[arg(long, requires = "spacing")]
    carriers: Option<usize>,

    /// Samples of the cyclic prefix, at the rate spacing x FFT size
    #[arg(long, value_name = "SAMPLES", requires = "spacing")]
    prefix: Option<usize>,

    /// Samples over which a symbol fades into the next
    #[arg(long, value_name = "SAMPLES", requires = "spacing")]
    edge: Option<usize>,

    /// The carrier at offset 0 carries data
    #[arg(long, requires = "spacing")]
    centre_used: bool,
}

impl SymbolOptions {
    pub(super) fn format(&self) -> Result<Option<SymbolFormat>, Failure> {
        let Some(modulation) = self.modulation else {
            return Ok(None);
        };
        let format = match (self.symbol_rate, self.spacing) {
            (Some(symbol_rate_hz), None) => SymbolFormat::SingleCarrier {
                modulation,
                symbol_rate_hz,
                rolloff: self.rolloff.ok_or_else(|| {
                    Failure::new("--rolloff: not given; it is needed with --symbol-rate")
                })?,
            },
            (None, Some(spacing_hz)) => SymbolFormat::Ofdm(Ofdm {
                modulation,
                spacing_hz,
                fft_size: self.fft.unwrap_or(0),
                carriers: self.carriers.unwrap_or(0),
                centre: if self.centre_used {
                    Centre::Used
                } else {
                    Centre::Empty
                },
                prefix: self.prefix.unwrap_or(0),
                edge: self.edge.unwrap_or(0),
                oversampling: 1,
                symbols: 1,
                ends: Ends::Open,
            }),
            _ => {
                return Err(Failure::new(
                    "--modulation: with it --symbol-rate (single carrier) or --spacing (OFDM) is needed",
                ));
            }
        };
        format
            .check()
            .map_err(|problem| Failure::new(format!("the known format: {problem}")))?;
        Ok(Some(format))
    }
}

fn modulation(text: &str) -> Result<Modulation, String> {
    MODULATIONS
        .iter()
        .find(|(name, _)| *name == text)
        .map(|(_, modulation)| *modulation)
        .ok_or_else(|| {
            let words: Vec<&str> = MODULATIONS.iter().map(|(name, _)| *name).collect();
            format!("allowed: {}", words.join(", "))
        })
}
