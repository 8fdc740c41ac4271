//! `quietedge signal`: makes test signals, and shows what a signal file holds.

mod arguments;

use std::path::Path;

use serde::Serialize;

use super::{Console, Disk, Ending, Failure, OutputFolder};
use crate::signal::{
    Format, FormatOptions, Kind, Levels, Noise, Ramp, Recipe, Writing, make, open, write,
};
use crate::units;

pub use arguments::Arguments;
use arguments::{Command, Numbers, Output, PhaseChoice, carrier, ofdm, tones};

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
    let mut name = file_name(&output.out)?;
    let mut sidecar_name = format!("{name}.toml");
    if writing.format() == Format::Sigmf
        && let Some((stem, _)) = name.rsplit_once('.')
    {
        // Either file of the recording names both.
        sidecar_name = format!("{stem}.sigmf-meta");
        name = format!("{stem}.sigmf-data");
    }
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
        (Format::Sigmf, None | Some(Numbers::Float32)) => Writing::SigmfCf32,
        (Format::Sigmf, Some(Numbers::Int16)) => Writing::SigmfCi16,
        (format, Some(_)) => {
            return Err(Failure::new(format!(
                "--numbers: .{} cannot hold these; allowed: int16, int24 or float32 in .wav, float32 or float64 in .npy, int16 or float32 in .sigmf-meta, nothing else elsewhere",
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
