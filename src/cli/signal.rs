//! `quietedge signal`: makes test signals, and shows what a signal file holds.

use std::path::{Path, PathBuf};

use clap::{Args, Subcommand, ValueEnum};
use serde::Serialize;

use super::{Console, Disk, Ending, Failure, OutputFolder};
use crate::signal::{
    Centre, Ends, Format, FormatOptions, Kind, Levels, Modulation, Noise, Ofdm, Phases, Ramp,
    Recipe, SingleCarrier, Tones, Writing, make, open, write,
};
use crate::units::{self, Dimension};

/// Make a test signal, or show what a signal file holds
#[derive(Debug, Args)]
pub struct Arguments {
    #[command(subcommand)]
    command: Command,
}

#[derive(Debug, Subcommand)]
enum Command {
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
  quietedge signal ofdm --spacing 78.125kHz --fft 64 --carriers 52 --prefix 16 --edge 4 --modulation qam64 --out ofdm.npy")]
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
struct CarrierArguments {
    /// How bits become points
    #[arg(long, value_enum, default_value = "qpsk")]
    modulation: ModulationChoice,
    /// Symbols a second
    #[arg(long, value_name = "HZ", value_parser = frequency)]
    symbol_rate: f64,
    /// Excess bandwidth of the filter, 0 to 1
    #[arg(long, default_value = "0.35", value_parser = ratio)]
    rolloff: f64,
    /// Samples a symbol
    #[arg(long, default_value_t = 8)]
    oversampling: usize,
    /// Length of the filter in symbols, even: longer lowers the floor beside the channel
    #[arg(long, default_value_t = 64)]
    span: usize,
    /// Number of symbols
    #[arg(long, default_value_t = 4096)]
    symbols: usize,
}

#[derive(Debug, Args)]
struct OfdmArguments {
    /// How bits become points
    #[arg(long, value_enum, default_value = "qpsk")]
    modulation: ModulationChoice,
    /// Distance between carriers
    #[arg(long, value_name = "HZ", value_parser = frequency)]
    spacing: f64,
    /// Samples of the useful symbol
    #[arg(long, value_name = "SAMPLES")]
    fft: usize,
    /// Number of carriers with data
    #[arg(long)]
    carriers: usize,
    /// Whether the carrier at offset 0 carries data
    #[arg(long, value_enum, default_value = "empty")]
    centre: CentreChoice,
    /// Samples of the cyclic prefix, before oversampling
    #[arg(long, value_name = "SAMPLES")]
    prefix: usize,
    /// Samples over which a symbol fades into the next, at most the prefix
    #[arg(long, value_name = "SAMPLES", default_value_t = 0)]
    edge: usize,
    /// Samples out for one sample of the FFT
    #[arg(long, default_value_t = 4)]
    oversampling: usize,
    /// Number of OFDM symbols
    #[arg(long, default_value_t = 64)]
    symbols: usize,
}

#[derive(Debug, Args)]
struct Grid {
    /// Sample rate
    #[arg(long, value_name = "HZ", value_parser = frequency)]
    rate: f64,
    /// Number of samples
    #[arg(long, default_value_t = 65_536)]
    samples: usize,
}

#[derive(Debug, Args)]
struct Output {
    /// The file to write: .wav, .csv, .cf32, .ci16 or .npy; a sidecar FILE.toml holds the rate of all but .wav
    #[arg(long, value_name = "FILE")]
    out: PathBuf,
    /// Overwrite files that are there already
    #[arg(long)]
    force: bool,
    /// How numbers are written, where the format leaves a choice (.wav: int16, int24, float32; .npy: float32, float64)
    #[arg(long, value_enum)]
    numbers: Option<Numbers>,
    /// Seed of the random numbers; the same seed gives the same bytes
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// Largest magnitude, full scale is 1
    #[arg(long, default_value = "1", value_parser = ratio)]
    peak: f64,
    /// Let the last sample lead into the first
    #[arg(long)]
    periodic: bool,
}

impl Output {
    fn ends(&self) -> Ends {
        if self.periodic {
            Ends::Periodic
        } else {
            Ends::Open
        }
    }
}

#[derive(Debug, Clone, Copy, ValueEnum)]
enum ModulationChoice {
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
enum CentreChoice {
    Empty,
    Used,
}

#[derive(Debug, Clone, Copy, ValueEnum)]
enum PhaseChoice {
    Equal,
    Newman,
    Random,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum Numbers {
    Int16,
    Int24,
    Float32,
    Float64,
}

fn quantity(text: &str, dimension: Dimension) -> Result<f64, String> {
    units::parse(text, dimension).map_err(|error| {
        format!(
            "{error}; allowed: {dimension}, such as {}",
            dimension.example()
        )
    })
}

fn frequency(text: &str) -> Result<f64, String> {
    quantity(text, Dimension::Frequency)
}

fn ratio(text: &str) -> Result<f64, String> {
    quantity(text, Dimension::Ratio)
}

fn format(text: &str) -> Result<Format, String> {
    Format::ALL
        .iter()
        .find(|(name, _)| *name == text)
        .map(|(_, format)| *format)
        .ok_or_else(|| "allowed: wav, csv, cf32, ci16, npy".to_owned())
}

/// Runs the command.
///
/// # Errors
/// Parameters that no signal has, a file that cannot be read or written.
pub fn run(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    let (kind, output) = match &arguments.command {
        Command::Show {
            file,
            format,
            rate,
            full_scale,
        } => {
            let options = FormatOptions {
                format: *format,
                rate_hz: *rate,
                full_scale: *full_scale,
            };
            return show(file, &options, console);
        }
        Command::SingleCarrier { shape, output } => (carrier(shape, output), output),
        Command::Ofdm { shape, output } => (ofdm(shape, output), output),
        Command::TwoTone {
            spacing,
            grid,
            output,
        } => (tones(2, *spacing, PhaseChoice::Equal, grid, output), output),
        Command::Multitone {
            tones: count,
            spacing,
            phases,
            grid,
            output,
        } => (tones(*count, *spacing, *phases, grid, output), output),
        Command::Noise {
            bandwidth,
            grid,
            output,
        } => (
            Kind::Noise(Noise {
                rate_hz: grid.rate,
                samples: grid.samples,
                bandwidth_hz: *bandwidth,
                ends: output.ends(),
            }),
            output,
        ),
        Command::Ramp { from, grid, output } => (
            Kind::Ramp(Ramp {
                rate_hz: grid.rate,
                samples: grid.samples,
                from: *from,
                ends: output.ends(),
            }),
            output,
        ),
    };
    let recipe = Recipe {
        kind,
        peak: output.peak,
    };
    save(&recipe, output, console)
}

fn carrier(shape: &CarrierArguments, output: &Output) -> Kind {
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

fn ofdm(shape: &OfdmArguments, output: &Output) -> Kind {
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

fn tones(count: usize, spacing: f64, phases: PhaseChoice, grid: &Grid, output: &Output) -> Kind {
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

/// What the command tells about the file it made.
#[derive(Debug, Serialize)]
struct Made<'a> {
    file: String,
    format: Writing,
    rate_hz: f64,
    samples: u64,
    duration_s: f64,
    rms: f64,
    peak: f64,
    papr_db: f64,
    seed: u64,
    recipe: &'a Recipe,
}

fn save(recipe: &Recipe, output: &Output, console: &Console) -> Result<Ending, Failure> {
    recipe.check()?;
    let shown = output.out.display().to_string();
    let writing = writing(&shown, output.numbers)?;
    let sidecar = writing.sidecar(recipe.rate_hz());
    let name = file_name(&output.out)?;
    let sidecar_name = format!("{name}.toml");
    let folder = match output.out.parent() {
        Some(folder) if folder != Path::new("") => folder,
        _ => Path::new("."),
    };
    let mut names = vec![name.as_str()];
    if sidecar.is_some() {
        names.push(&sidecar_name);
    }
    let target = OutputFolder::claim(folder, output.force, &names)?;

    let mut samples = make(recipe, output.seed)?;
    let levels = Levels::of(samples.as_slice());
    target.write_with(&name, |file| {
        write(&mut samples, writing, file, &shown)?;
        Ok(())
    })?;
    if let Some(text) = sidecar {
        target.write(&sidecar_name, text.as_bytes())?;
    }
    let rate_hz = recipe.rate_hz();
    console.print(&format!(
        "{shown}\n{}\nseed      {}",
        table(rate_hz, &levels),
        output.seed
    ))?;
    console.print_json(&Made {
        file: shown,
        format: writing,
        rate_hz,
        samples: levels.samples,
        duration_s: levels.samples as f64 / rate_hz,
        rms: levels.rms,
        peak: levels.peak,
        papr_db: levels.papr_db,
        seed: output.seed,
        recipe,
    })?;
    Ok(Ending::Within)
}

fn file_name(path: &Path) -> Result<String, Failure> {
    path.file_name()
        .and_then(|name| name.to_str())
        .map(str::to_owned)
        .ok_or_else(|| {
            Failure::new(format!(
                "--out {}: given no usable file name; allowed: a name such as signal.wav",
                path.display()
            ))
        })
}

/// The way of writing that the extension and `--numbers` ask for.
fn writing(shown: &str, numbers: Option<Numbers>) -> Result<Writing, Failure> {
    let format = Format::of_name(shown)?;
    Ok(match (format, numbers) {
        (Format::Wav, None | Some(Numbers::Float32)) => Writing::WavFloat,
        (Format::Wav, Some(Numbers::Int16)) => Writing::WavInt16,
        (Format::Wav, Some(Numbers::Int24)) => Writing::WavInt24,
        (Format::Csv, None | Some(Numbers::Float64)) => Writing::Csv,
        (Format::Cf32, None | Some(Numbers::Float32)) => Writing::Cf32,
        (Format::Ci16, None | Some(Numbers::Int16)) => Writing::Ci16,
        (Format::Npy, None | Some(Numbers::Float32)) => Writing::NpyComplex64,
        (Format::Npy, Some(Numbers::Float64)) => Writing::NpyComplex128,
        (format, Some(_)) => {
            return Err(Failure::new(format!(
                "--numbers: .{} cannot hold these; allowed: int16, int24 or float32 in .wav, float32 or float64 in .npy, nothing else elsewhere",
                format.name()
            )));
        }
    })
}

fn table(rate_hz: f64, levels: &Levels) -> String {
    format!(
        "rate      {}\nsamples   {}\nduration  {}\nRMS       {:.6} of full scale ({:.2} dB)\npeak      {:.6} of full scale\nPAPR      {}",
        units::show(rate_hz, "Hz", 9),
        levels.samples,
        units::show(levels.samples as f64 / rate_hz, "s", 6),
        levels.rms,
        2.0 * units::db(levels.rms),
        levels.peak,
        if levels.rms > 0.0 {
            format!("{:.2} dB", levels.papr_db)
        } else {
            "none, the signal is zero throughout".to_owned()
        }
    )
}

/// What `show` tells about a file.
#[derive(Debug, Serialize)]
struct Shown {
    file: String,
    rate_hz: f64,
    samples: u64,
    duration_s: f64,
    rms: f64,
    peak: f64,
    papr_db: f64,
}

fn show(file: &Path, options: &FormatOptions, console: &Console) -> Result<Ending, Failure> {
    let name = file_name(file)?;
    let mut source = open(&Disk::beside(file), &name, options)?;
    let levels = Levels::of_source(source.as_mut())?;
    let rate_hz = source.rate_hz();
    console.print(&format!("{}\n{}", file.display(), table(rate_hz, &levels)))?;
    console.print_json(&Shown {
        file: file.display().to_string(),
        rate_hz,
        samples: levels.samples,
        duration_s: levels.samples as f64 / rate_hz,
        rms: levels.rms,
        peak: levels.peak,
        // An all-zero signal has no ratio; JSON has no NaN and shows null.
        papr_db: levels.papr_db,
    })?;
    Ok(Ending::Within)
}
