//! `quietedge design`: targets to a stage file.

use std::path::PathBuf;

use super::arguments::quantity;
use super::{Console, Disk, Ending, Failure, OutputFolder, OutputOptions};
use crate::design::{Choice, PartLosses, Series, Targets, design};
use crate::input::{Files, Problem};
use crate::orbit::{Drive, Network};
use crate::report::design::{Rounded, design_document, design_text, series_word};
use crate::report::stage::waveform_figure;
use crate::stage::{Arrangement, Device, Stage, Switch, TABLE_NAME};
use crate::units::Dimension;

/// Design a class E stage for a power, solved with its losses, and write its stage file
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge design --frequency 169.4MHz --power 5W --supply 6V --load-resistance 50ohm --no-excess --out stage
  quietedge design --frequency 905MHz --power 1.6W --supply 12V --choke --closed-resistance 0.9ohm --round e24
  quietedge design --frequency 13.56MHz --power 20W --supply 24V --feed-ratio 1.3 --device switch.toml
      switch.toml holds the tables [switch], [drain] and [driver] of a stage file, curved capacitance included")]
pub struct Arguments {
    /// Carrier
    #[arg(long, value_parser = quantity(Dimension::Frequency))]
    frequency: f64,

    /// Power of the fundamental in the load
    #[arg(long, value_parser = quantity(Dimension::Power))]
    power: f64,

    /// Supply voltage
    #[arg(long, value_parser = quantity(Dimension::Voltage))]
    supply: f64,

    /// Load resistance
    #[arg(long, default_value = "50ohm", value_parser = quantity(Dimension::Resistance))]
    load_resistance: f64,

    /// Closed fraction of the period
    #[arg(long, default_value = "0.5", value_parser = quantity(Dimension::Ratio))]
    duty: f64,

    /// Reactance of the series capacitor over the resistance that the stage sees
    #[arg(long, default_value = "5", value_parser = quantity(Dimension::Ratio))]
    loaded_q: f64,

    #[command(flatten)]
    choice: ChoiceOptions,

    /// Device file: tables [switch], [drain], [driver] as in a stage file, in place of the next three options
    #[arg(long, value_name = "FILE", conflicts_with_all = ["closed_resistance", "open_resistance", "device_fixed"])]
    device: Option<PathBuf>,

    /// Closed resistance of the switch
    #[arg(long, default_value = "0.1ohm", value_parser = quantity(Dimension::Resistance))]
    closed_resistance: f64,

    /// Open resistance of the switch; open where absent
    #[arg(long, value_parser = quantity(Dimension::Resistance))]
    open_resistance: Option<f64>,

    /// Fixed capacitance that the device brings to the drain
    #[arg(long = "device-capacitance", id = "device_fixed", default_value = "0F", value_parser = quantity(Dimension::Capacitance))]
    device_capacitance: f64,

    /// Resistance of the feed
    #[arg(long, default_value = "0ohm", value_parser = quantity(Dimension::Resistance))]
    feed_resistance: f64,

    /// Quality factor of the inductors at the carrier
    #[arg(long, default_value = "100", value_parser = quantity(Dimension::Ratio))]
    inductor_q: f64,

    /// Quality factor of the capacitors at the carrier
    #[arg(long, default_value = "400", value_parser = quantity(Dimension::Ratio))]
    capacitor_q: f64,

    /// Round the parts to preferred values (IEC 60063), show what that costs, and write the rounded stage
    #[arg(long, value_enum, value_name = "SERIES")]
    round: Option<SeriesWord>,

    /// Title of the stage
    #[arg(long, default_value = "Designed stage")]
    title: String,

    #[command(flatten)]
    output: OutputOptions,
}

/// The one free choice.
#[derive(Debug, clap::Args)]
#[group(multiple = false)]
struct ChoiceOptions {
    /// Free choice: no excess reactance (the default)
    #[arg(long)]
    no_excess: bool,

    /// Free choice: an ideal choke
    #[arg(long)]
    choke: bool,

    /// Free choice: the ratio 1 / (w sqrt(L C)) of feed and drain capacitance, up to 1.8
    #[arg(long, value_name = "RATIO", value_parser = quantity(Dimension::Ratio))]
    feed_ratio: Option<f64>,

    /// Free choice: the feed that makes the device's own capacitance the whole drain capacitance
    #[arg(long)]
    fit_device: bool,
}

#[derive(Debug, Clone, Copy, clap::ValueEnum)]
enum SeriesWord {
    /// 12 values a decade
    E12,
    /// 24 values a decade
    E24,
    /// 96 values a decade
    E96,
}

impl SeriesWord {
    fn series(self) -> Series {
        match self {
            Self::E12 => Series::E12,
            Self::E24 => Series::E24,
            Self::E96 => Series::E96,
        }
    }
}

const NAMES: [&str; 5] = [
    "stage.toml",
    "design.json",
    "waveform.svg",
    "waveform.png",
    TABLE_NAME,
];

/// Runs the command.
///
/// # Errors
/// Targets that no stage has; files that cannot be read or written.
pub fn run(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    let folder = OutputFolder::claim_option(&arguments.output, &NAMES)?;
    let targets = arguments.targets()?;
    let design = design(&targets)?;
    let rounded = arguments
        .round
        .map(|word| {
            let series = word.series();
            let parts = design.parts.rounded(series, targets.device.drain_f);
            let stage = parts.stage(&targets);
            let network = Network::new(&stage)?;
            let drive = Drive::new(&stage.driver, stage.driver.duty);
            let orbit = network.orbit(stage.supply_v, &drive)?;
            Ok::<_, Failure>((
                stage,
                Rounded {
                    series,
                    parts,
                    orbit,
                },
            ))
        })
        .transpose()?;
    let beside = rounded.as_ref().map(|(_, rounded)| rounded);
    let document = design_document(&design, beside);
    console.print(&design_text(&design, beside))?;
    console.print_json(&document)?;
    if let Some(folder) = folder {
        let stage = rounded.as_ref().map_or(&design.stage, |(stage, _)| stage);
        write(&folder, stage, beside, &document)?;
        console.remark(&format!(
            "wrote the stage and its picture into {}",
            folder.display()
        ));
    }
    Ok(Ending::Within)
}

fn write(
    folder: &OutputFolder,
    stage: &Stage,
    rounded: Option<&Rounded>,
    document: &serde_json::Value,
) -> Result<(), Failure> {
    let values = rounded.map_or("exact values".to_owned(), |rounded| {
        format!("values of {}", series_word(rounded.series))
    });
    let remark = format!("Made by quietedge design; {values}.");
    let network = Network::new(stage)?;
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    let figure = waveform_figure(stage, &network.waveform(stage.supply_v, &drive, 400)?);
    folder.write(NAMES[0], stage.to_toml(&[remark]).as_bytes())?;
    folder.write(NAMES[1], &serde_json::to_vec_pretty(document)?)?;
    folder.write(NAMES[2], figure.svg()?.as_bytes())?;
    folder.write(NAMES[3], &figure.png()?)?;
    if let Some(table) = stage.drain_table_csv() {
        folder.write(NAMES[4], table.as_bytes())?;
    }
    Ok(())
}

impl Arguments {
    fn targets(&self) -> Result<Targets, Failure> {
        for (option, value) in [
            ("--frequency", self.frequency),
            ("--power", self.power),
            ("--supply", self.supply),
            ("--load-resistance", self.load_resistance),
            ("--closed-resistance", self.closed_resistance),
            ("--open-resistance", self.open_resistance.unwrap_or(1.0)),
            ("--inductor-q", self.inductor_q),
            ("--capacitor-q", self.capacitor_q),
        ] {
            allowed(option, value, value > 0.0, "more than 0")?;
        }
        for (option, value) in [
            ("--device-capacitance", self.device_capacitance),
            ("--feed-resistance", self.feed_resistance),
        ] {
            allowed(option, value, value >= 0.0, "0 or more")?;
        }
        allowed(
            "--duty",
            self.duty,
            (0.1..=0.9).contains(&self.duty),
            "0.1 to 0.9",
        )?;
        allowed(
            "--loaded-q",
            self.loaded_q,
            (1.0..=1000.0).contains(&self.loaded_q),
            "1 to 1000",
        )?;
        let choice = match self.choice {
            ChoiceOptions { choke: true, .. } => Choice::Choke,
            ChoiceOptions {
                fit_device: true, ..
            } => Choice::DeviceCapacitance,
            ChoiceOptions {
                feed_ratio: Some(ratio),
                ..
            } => {
                allowed(
                    "--feed-ratio",
                    ratio,
                    (0.1..=1.8).contains(&ratio),
                    "0.1 to 1.8",
                )?;
                Choice::FeedRatio(ratio)
            }
            _ => Choice::NoExcess,
        };
        Ok(Targets {
            title: self.title.clone(),
            frequency_hz: self.frequency,
            output_w: self.power,
            supply_v: self.supply,
            duty: self.duty,
            load_ohm: self.load_resistance,
            loaded_q: self.loaded_q,
            choice,
            device: self.device()?,
            losses: PartLosses {
                feed_ohm: self.feed_resistance,
                inductor_q: self.inductor_q,
                capacitor_q: self.capacitor_q,
            },
        })
    }

    fn device(&self) -> Result<Device, Failure> {
        let Some(path) = &self.device else {
            return Ok(Device {
                switch: Switch {
                    closed_ohm: self.closed_resistance,
                    open_ohm: self.open_resistance.unwrap_or(f64::INFINITY),
                    knee: None,
                    diode: None,
                    arrangement: Arrangement::Single,
                },
                drain_f: self.device_capacitance,
                drain_curve: None,
                gate_coupling_f: 0.0,
                gate: None,
            });
        };
        let name = path.display().to_string();
        let text = Disk::here()
            .text(&name)
            .map_err(|error| Problem::unreadable(&name, &error, "a device file, TOML in UTF-8"))?;
        Ok(Device::read_as(&name, &name, &text, &Disk::here())?)
    }
}

fn allowed(option: &str, value: f64, holds: bool, range: &str) -> Result<(), Failure> {
    if holds {
        Ok(())
    } else {
        Err(Failure::new(format!(
            "{option}: given {value}; allowed: {range}"
        )))
    }
}
