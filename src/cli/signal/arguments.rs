//! The options of `quietedge signal`, and the recipes they stand for.

use std::path::PathBuf;

use clap::{Args, Subcommand, ValueEnum};

use crate::signal::{Centre, Ends, Format, Kind, Modulation, Ofdm, Phases, SingleCarrier, Tones};
use crate::units::Dimension;

/// Make a test signal, or show what a signal file holds
#[derive(Debug, Args)]
pub struct Arguments {
    #[command(subcommand)]
    pub(super) command: Command,
}

#[derive(Debug, Subcommand)]
pub(super) enum Command {
    /// Random symbols through a root-raised-cosine filter
    #[command(after_help = "Examples:
  quietedge signal single-carrier --symbol-rate 4.8kHz --rolloff 0.35 --out carrier.cf32
  quietedge signal single-carrier --modulation qam16 --symbol-rate 1MHz --symbols 20000 --periodic --out qam.wav")]
    SingleCarrier {
        #[command(flatten)]
        shape: CarrierArguments,
        #[command(flatten)]
        output: Output,
    },
    /// Many narrow carriers with a cyclic prefix
    #[command(after_help = "Examples:
  quietedge signal ofdm --spacing 15kHz --fft 512 --carriers 300 --prefix 36 --out ofdm.cf32
  quietedge signal ofdm --spacing 78.125kHz --fft 64 --carriers 52 --prefix 16 --edge 4 --out ofdm.npy")]
    Ofdm {
        #[command(flatten)]
        shape: OfdmArguments,
        #[command(flatten)]
        output: Output,
    },
    /// Two equal tones about the carrier
    #[command(after_help = "Examples:
  quietedge signal two-tone --spacing 1kHz --rate 64kHz --samples 65536 --periodic --out two.wav")]
    TwoTone {
        /// Distance between the tones
        #[arg(long, value_name = "HZ", value_parser = frequency)]
        spacing: f64,
        #[command(flatten)]
        grid: Grid,
        #[command(flatten)]
        output: Output,
    },
    /// Several equal tones about the carrier
    #[command(after_help = "Examples:
  quietedge signal multitone --tones 8 --spacing 1kHz --phases newman --rate 64kHz --samples 65536 --out eight.wav")]
    Multitone {
        /// Number of tones
        #[arg(long)]
        tones: usize,
        /// Distance between neighbouring tones
        #[arg(long, value_name = "HZ", value_parser = frequency)]
        spacing: f64,
        /// How the tones stand to each other at the first sample
        #[arg(long, value_enum, default_value = "newman")]
        phases: PhaseChoice,
        #[command(flatten)]
        grid: Grid,
        #[command(flatten)]
        output: Output,
    },
    /// Complex Gaussian noise with a flat spectrum inside a band
    #[command(after_help = "Examples:
  quietedge signal noise --bandwidth 5MHz --rate 30MHz --samples 300000 --seed 7 --out noise.cf32")]
    Noise {
        /// Width of the band, half of it on each side of the carrier
        #[arg(long, value_name = "HZ", value_parser = frequency)]
        bandwidth: f64,
        #[command(flatten)]
        grid: Grid,
        #[command(flatten)]
        output: Output,
    },
    /// A magnitude that rises linearly; with --periodic it falls again
    #[command(after_help = "Examples:
  quietedge signal ramp --rate 1MHz --samples 10000 --out ramp.csv")]
    Ramp {
        /// Lowest magnitude as a fraction of the highest
        #[arg(long, default_value = "0", value_parser = ratio)]
        from: f64,
        #[command(flatten)]
        grid: Grid,
        #[command(flatten)]
        output: Output,
    },
    /// Show the rate, length and levels of a signal file
    #[command(after_help = "Examples:
  quietedge signal show capture.wav
  quietedge signal show capture.cf32 --rate 30.72MHz")]
    Show {
        /// The signal file
        file: PathBuf,
        /// The format, where the extension does not say it
        #[arg(long, value_parser = format)]
        format: Option<Format>,
        /// Sample rate, where the file does not hold it
        #[arg(long, value_name = "HZ", value_parser = frequency)]
        rate: Option<f64>,
        /// The number in the file that stands for full scale
        #[arg(long, value_parser = ratio)]
        full_scale: Option<f64>,
    },
}

#[derive(Debug, Args)]
pub(super) struct CarrierArguments {
    /// How bits become points
    #[arg(long, value_enum, default_value = "qpsk")]
    pub(super) modulation: ModulationChoice,
    /// Symbols a second
    #[arg(long, value_name = "HZ", value_parser = frequency)]
    pub(super) symbol_rate: f64,
    /// Excess bandwidth of the filter, 0 to 1
    #[arg(long, default_value = "0.35", value_parser = ratio)]
    pub(super) rolloff: f64,
    /// Samples a symbol
    #[arg(long, default_value_t = 8)]
    pub(super) oversampling: usize,
    /// Length of the filter in symbols, even: longer lowers the floor beside the channel
    #[arg(long, default_value_t = 64)]
    pub(super) span: usize,
    /// Number of symbols
    #[arg(long, default_value_t = 4096)]
    pub(super) symbols: usize,
}

#[derive(Debug, Args)]
pub(super) struct OfdmArguments {
    /// How bits become points
    #[arg(long, value_enum, default_value = "qpsk")]
    pub(super) modulation: ModulationChoice,
    /// Distance between carriers
    #[arg(long, value_name = "HZ", value_parser = frequency)]
    pub(super) spacing: f64,
    /// Samples of the useful symbol
    #[arg(long, value_name = "SAMPLES")]
    pub(super) fft: usize,
    /// Number of carriers with data
    #[arg(long)]
    pub(super) carriers: usize,
    /// Whether the carrier at offset 0 carries data
    #[arg(long, value_enum, default_value = "empty")]
    pub(super) centre: CentreChoice,
    /// Samples of the cyclic prefix, before oversampling
    #[arg(long, value_name = "SAMPLES")]
    pub(super) prefix: usize,
    /// Samples over which a symbol fades into the next, at most the prefix
    #[arg(long, value_name = "SAMPLES", default_value_t = 0)]
    pub(super) edge: usize,
    /// Samples out for one sample of the FFT
    #[arg(long, default_value_t = 4)]
    pub(super) oversampling: usize,
    /// Number of OFDM symbols
    #[arg(long, default_value_t = 64)]
    pub(super) symbols: usize,
}

#[derive(Debug, Args)]
pub(super) struct Grid {
    /// Sample rate
    #[arg(long, value_name = "HZ", value_parser = frequency)]
    pub(super) rate: f64,
    /// Number of samples
    #[arg(long, default_value_t = 65_536)]
    pub(super) samples: usize,
}

#[derive(Debug, Args)]
pub(super) struct Output {
    /// The file to write: .wav, .csv, .cf32, .ci16, .npy or .sigmf-meta (with .sigmf-data); a sidecar FILE.toml holds the rate of all but .wav and SigMF
    #[arg(long, value_name = "FILE")]
    pub(super) out: PathBuf,
    /// Overwrite files that are there already
    #[arg(long)]
    pub(super) force: bool,
    /// How numbers are written, where the format leaves a choice (.wav: int16, int24, float32; .npy: float32, float64)
    #[arg(long, value_enum)]
    pub(super) numbers: Option<Numbers>,
    /// Seed of the random numbers; the same seed gives the same bytes
    #[arg(long, default_value_t = 1)]
    pub(super) seed: u64,
    /// Largest magnitude, full scale is 1
    #[arg(long, default_value = "1", value_parser = ratio)]
    pub(super) peak: f64,
    /// Let the last sample lead into the first
    #[arg(long)]
    pub(super) periodic: bool,
}

impl Output {
    pub(super) fn ends(&self) -> Ends {
        if self.periodic {
            Ends::Periodic
        } else {
            Ends::Open
        }
    }
}

#[derive(Debug, Clone, Copy, ValueEnum)]
pub(super) enum ModulationChoice {
    Qpsk,
    Pi4Dqpsk,
    Psk8,
    Qam16,
    Qam64,
}

impl From<ModulationChoice> for Modulation {
    fn from(choice: ModulationChoice) -> Self {
        match choice {
            ModulationChoice::Qpsk => Self::Qpsk,
            ModulationChoice::Pi4Dqpsk => Self::Pi4Dqpsk,
            ModulationChoice::Psk8 => Self::Psk8,
            ModulationChoice::Qam16 => Self::Qam16,
            ModulationChoice::Qam64 => Self::Qam64,
        }
    }
}

#[derive(Debug, Clone, Copy, ValueEnum)]
pub(super) enum CentreChoice {
    Empty,
    Used,
}

#[derive(Debug, Clone, Copy, ValueEnum)]
pub(super) enum PhaseChoice {
    Equal,
    Newman,
    Random,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub(super) enum Numbers {
    Int16,
    Int24,
    Float32,
    Float64,
}

pub(super) fn quantity(text: &str, dimension: Dimension) -> Result<f64, String> {
    crate::cli::arguments::quantity(dimension)(text)
}

pub(super) fn frequency(text: &str) -> Result<f64, String> {
    quantity(text, Dimension::Frequency)
}

pub(super) fn ratio(text: &str) -> Result<f64, String> {
    quantity(text, Dimension::Ratio)
}

pub(super) fn format(text: &str) -> Result<Format, String> {
    Format::ALL
        .iter()
        .find(|(name, _)| *name == text)
        .map(|(_, format)| *format)
        .ok_or_else(|| "allowed: wav, csv, cf32, ci16, npy, sigmf".to_owned())
}

pub(super) fn carrier(shape: &CarrierArguments, output: &Output) -> Kind {
    Kind::SingleCarrier(SingleCarrier {
        modulation: shape.modulation.into(),
        symbol_rate_hz: shape.symbol_rate,
        rolloff: shape.rolloff,
        oversampling: shape.oversampling,
        span: shape.span,
        symbols: shape.symbols,
        ends: output.ends(),
    })
}

pub(super) fn ofdm(shape: &OfdmArguments, output: &Output) -> Kind {
    Kind::Ofdm(Ofdm {
        modulation: shape.modulation.into(),
        spacing_hz: shape.spacing,
        fft_size: shape.fft,
        carriers: shape.carriers,
        centre: match shape.centre {
            CentreChoice::Empty => Centre::Empty,
            CentreChoice::Used => Centre::Used,
        },
        prefix: shape.prefix,
        edge: shape.edge,
        oversampling: shape.oversampling,
        symbols: shape.symbols,
        ends: output.ends(),
    })
}

pub(super) fn tones(
    count: usize,
    spacing: f64,
    phases: PhaseChoice,
    grid: &Grid,
    output: &Output,
) -> Kind {
    Kind::Tones(Tones {
        rate_hz: grid.rate,
        samples: grid.samples,
        count,
        spacing_hz: spacing,
        phases: match phases {
            PhaseChoice::Equal => Phases::Equal,
            PhaseChoice::Newman => Phases::Newman,
            PhaseChoice::Random => Phases::Random,
        },
        ends: output.ends(),
    })
}
