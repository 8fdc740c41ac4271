//! `quietedge solve`: one orbit of a stage.

use std::path::{Path, PathBuf};

use num_complex::Complex64;

use super::arguments::quantity;
use super::ratings::{RatingOptions, ending};
use super::{Console, Disk, Ending, Failure, OutputFolder, OutputOptions};
use crate::input::{Files, Problem};
use crate::orbit::{Drive, Network};
use crate::report::documents::solve_document;
use crate::report::stage::{orbit_text, waveform_figure};
use crate::report::stress::{add_verdict, stress_of, stress_text};
use crate::stage::{Load, Stage, magnitude_of_vswr};
use crate::units::Dimension;
use crate::verdict::Stressed;

/// Solve the periodic steady state of a stage at one supply and width
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge solve signals/tide-gauge.stage.toml
  quietedge solve my.stage.toml --supply 3V --duty 0.4 --json
  quietedge solve my.stage.toml --vswr 2 --reflection-angle 40deg --peak-voltage 30V
  quietedge solve my.stage.toml --out orbit
      writes waveform.svg, waveform.png and orbit.json into orbit/")]
pub struct Arguments {
    /// Stage file (TOML)
    stage: PathBuf,

    #[command(flatten)]
    changes: Changes,

    #[command(flatten)]
    ratings: RatingOptions,

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

    /// Standing-wave ratio of the load against its resistance, such as 2
    #[arg(long, value_name = "RATIO", value_parser = quantity(Dimension::Ratio))]
    vswr: Option<f64>,

    /// Angle of its reflection coefficient, such as 40deg
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true, requires = "vswr", value_parser = quantity(Dimension::Angle))]
    reflection_angle: Option<f64>,
}

impl Changes {
    /// The standing-wave ratio of a sweep over the load's angle, which takes no angle of its own.
    ///
    /// # Errors
    /// No ratio; an angle.
    pub fn swept_vswr(&self) -> Result<f64, Failure> {
        if self.reflection_angle.is_some() {
            return Err(Failure::new(
                "--reflection-angle: allowed: not with --control load, which sweeps it (--from and --to narrow it)",
            ));
        }
        self.vswr
            .ok_or_else(|| Failure::new("--control load: needs --vswr, such as --vswr 2"))
    }

    /// Reads the stage in `path` and makes the changes.
    ///
    /// # Errors
    /// A stage file with something wrong; a change that no stage can have.
    pub fn stage(&self, path: &Path) -> Result<Stage, Failure> {
        let mut stage = self.stage_at_own_load(path)?;
        match (self.vswr, self.reflection_angle) {
            (None, _) => {}
            (Some(_), None) => {
                return Err(Failure::new(
                    "--vswr: needs --reflection-angle, such as 40deg; `map --control load` sweeps it",
                ));
            }
            (Some(vswr), Some(angle_rad)) => {
                if !(1.0..=199.0).contains(&vswr) {
                    return Err(Failure::new(format!(
                        "--vswr: given {vswr}; allowed: 1 to 199"
                    )));
                }
                let gamma = Complex64::from_polar(magnitude_of_vswr(vswr), angle_rad);
                let reference_ohm = stage.load.reference_ohm;
                stage.load = Load::reflecting(gamma, reference_ohm, stage.frequency_hz);
            }
        }
        Ok(stage)
    }

    /// As [`Changes::stage`], without the change of the load's reflection.
    ///
    /// # Errors
    /// As [`Changes::stage`].
    pub fn stage_at_own_load(&self, path: &Path) -> Result<Stage, Failure> {
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
            let ohm = positive("--load-resistance", ohm)?;
            stage.load = stage.load.with_reference(ohm, stage.frequency_hz);
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
    let ratings = arguments.ratings.ratings()?;
    let stage = arguments.changes.stage(&arguments.stage)?;
    let about = |error: &dyn std::fmt::Display| {
        Failure::new(format!("{}: {error}", arguments.stage.display()))
    };
    let network = Network::new(&stage).map_err(|error| about(&error))?;
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    let (orbits, unstable) = network
        .orbits(stage.supply_v, &drive)
        .map_err(|error| about(&error))?;
    let Some((orbit, others)) = orbits.split_first() else {
        return Err(about(&"the stage has no orbit"));
    };
    let mut document = solve_document(&stage, orbit, others);
    console.print(&orbit_text(&stage, orbit))?;
    let mut end = Ending::Within;
    if !ratings.is_empty() {
        let here = Stressed {
            place: "in this orbit".to_owned(),
            stress: stress_of(orbit),
        };
        let verdict = ratings.verdict(&[here], 0);
        console.print(&format!("\n{}", stress_text(&verdict)))?;
        add_verdict(&mut document, &ratings, &verdict, &[]);
        end = ending(&verdict);
    }
    if !others.is_empty() {
        console.remark(&format!(
            "several solutions found: this stage has {} further periodic states at the same supply and width; which \
             one it settles to depends on how it is started (other_orbits in the JSON document)",
            others.len()
        ));
    }
    if unstable > 0 {
        console.remark(&format!(
            "{unstable} further periodic states are unstable: no stage stays in them"
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
    Ok(end)
}
