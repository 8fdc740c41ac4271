//! `quietedge solve`: one orbit of a stage.

use std::path::{Path, PathBuf};

use super::arguments::quantity;
use super::{Console, Disk, Ending, Failure, OutputFolder, OutputOptions};
use crate::input::{Files, Problem};
use crate::orbit::{Drive, Network};
use crate::report::documents::solve_document;
use crate::report::stage::{orbit_text, waveform_figure};
use crate::stage::Stage;
use crate::units::Dimension;

/// Solve the periodic steady state of a stage at one supply and width
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge solve signals/tide-gauge.stage.toml
  quietedge solve my.stage.toml --supply 3V --duty 0.4 --json
  quietedge solve my.stage.toml --out orbit
      writes waveform.svg, waveform.png and orbit.json into orbit/")]
pub struct Arguments {
    /// Stage file (TOML)
    stage: PathBuf,

    #[command(flatten)]
    changes: Changes,

    #[command(flatten)]
    output: OutputOptions,
}

/// What is changed of a stage file for one run.
#[derive(Debug, Clone, clap::Args)]
#[command(next_help_heading = "In place of the stage file's values")]
pub struct Changes {
    /// Supply voltage, such as 3V
    #[arg(long, value_name = "V", value_parser = quantity(Dimension::Voltage))]
    supply: Option<f64>,

    /// Closed fraction of the period, such as 0.4 or 40%
    #[arg(long, value_name = "PART", value_parser = quantity(Dimension::Ratio))]
    duty: Option<f64>,

    /// Carrier, such as 170MHz; parts keep their inductance, capacitance and loss
    #[arg(long, value_name = "HZ", value_parser = quantity(Dimension::Frequency))]
    frequency: Option<f64>,

    /// Load resistance, such as 40ohm
    #[arg(long, value_name = "OHM", value_parser = quantity(Dimension::Resistance))]
    load_resistance: Option<f64>,
}

impl Changes {
    /// Reads the stage in `path` and makes the changes.
    ///
    /// # Errors
    /// A stage file with something wrong; a change that no stage can have.
    pub fn stage(&self, path: &Path) -> Result<Stage, Failure> {
        let name = path.display().to_string();
        let text = Disk::here()
            .text(&name)
            .map_err(|error| Problem::unreadable(&name, &error, "a stage file, TOML in UTF-8"))?;
        let mut stage = Stage::read(&name, &text, &Disk::here())?;
        let positive = |option: &str, value: f64| {
            if value > 0.0 {
                Ok(value)
            } else {
                Err(Failure::new(format!(
                    "{option}: given {value}; allowed: more than 0"
                )))
            }
        };
        if let Some(supply_v) = self.supply {
            stage.supply_v = positive("--supply", supply_v)?;
        }
        if let Some(duty) = self.duty {
            if !(0.01..=0.99).contains(&duty) {
                let text = format!("--duty: given {duty}; allowed: 0.01 to 0.99");
                return Err(Failure::new(text));
            }
            stage.driver.duty = duty;
        }
        if let Some(frequency_hz) = self.frequency {
            stage.frequency_hz = positive("--frequency", frequency_hz)?;
        }
        if let Some(ohm) = self.load_resistance {
            stage.load.ohm = positive("--load-resistance", ohm)?;
        }
        Ok(stage)
    }
}

/// Runs the command.
///
/// # Errors
/// A stage that cannot be read or solved; files that cannot be written.
pub fn run(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    let names = ["waveform.svg", "waveform.png", "orbit.json"];
    let folder = OutputFolder::claim_option(&arguments.output, &names)?;
    let stage = arguments.changes.stage(&arguments.stage)?;
    let about = |error: &dyn std::fmt::Display| {
        Failure::new(format!("{}: {error}", arguments.stage.display()))
    };
    let network = Network::new(&stage).map_err(|error| about(&error))?;
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    let orbits = network
        .orbits(stage.supply_v, &drive)
        .map_err(|error| about(&error))?;
    let Some((orbit, others)) = orbits.split_first() else {
        return Err(about(&"the stage has no orbit"));
    };
    let document = solve_document(&stage, orbit, others);
    console.print(&orbit_text(&stage, orbit))?;
    if !others.is_empty() {
        console.remark(&format!(
            "several solutions found: this stage has {} further periodic states at the same supply and width; which \
             one it settles to depends on how it is started (other_orbits in the JSON document)",
            others.len()
        ));
    }
    console.print_json(&document)?;
    if let Some(folder) = folder {
        let figure = waveform_figure(&stage, &network.waveform(stage.supply_v, &drive, 400)?);
        folder.write(names[0], figure.svg()?.as_bytes())?;
        folder.write(names[1], &figure.png()?)?;
        folder.write(names[2], &serde_json::to_vec_pretty(&document)?)?;
        console.remark(&format!(
            "wrote {} into {}",
            names.join(", "),
            folder.display()
        ));
    }
    Ok(Ending::Within)
}
