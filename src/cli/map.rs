//! `quietedge map`: the stage over a control.

use std::path::PathBuf;

use super::arguments::quantity;
use super::solve::Changes;
use super::{Console, Ending, Failure, OutputFolder, OutputOptions};
use crate::map::{Control, Sweep};
use crate::orbit::Network;
use crate::report::documents::{map_csv, map_document};
use crate::report::stage::{map_figure, map_text};
use crate::units::Dimension;

/// Solve a stage over its supply or its pulse width: AM-AM and AM-PM
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge map signals/tide-gauge.stage.toml --control supply
  quietedge map my.stage.toml --control width --from 0.1 --to 0.5 --points 81
  quietedge map my.stage.toml --control supply --out map
      writes map.csv, map.json, map.svg and map.png into map/; a study can name the
      first two in place of a stage: map = \"map/map.csv\"")]
pub struct Arguments {
    /// Stage file (TOML)
    stage: PathBuf,

    /// What is moved over the map
    #[arg(long, value_enum, default_value_t = ControlWord::Supply)]
    control: ControlWord,

    /// First value: volts for supply, a fraction of the period for width
    #[arg(long, value_name = "VALUE")]
    from: Option<String>,

    /// Last value; the stage's own supply or duty where absent
    #[arg(long, value_name = "VALUE")]
    to: Option<String>,

    /// Number of evenly spaced values
    #[arg(long, value_name = "N", default_value_t = 201, value_parser = clap::value_parser!(u32).range(2..=100_001))]
    points: u32,

    #[command(flatten)]
    changes: Changes,

    #[command(flatten)]
    output: OutputOptions,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
enum ControlWord {
    /// Supply voltage, from 0 V to the stage's own
    Supply,
    /// Closed fraction of the period, from a fortieth of the stage's own to the whole of it
    Width,
}

/// Runs the command.
///
/// # Errors
/// A stage that cannot be read or solved; files that cannot be written.
pub fn run(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    let names = ["map.csv", "map.json", "map.svg", "map.png"];
    let folder = OutputFolder::claim_option(&arguments.output, &names)?;
    let stage = arguments.changes.stage(&arguments.stage)?;
    let about = |error: &dyn std::fmt::Display| {
        Failure::new(format!("{}: {error}", arguments.stage.display()))
    };
    let network = Network::new(&stage).map_err(|error| about(&error))?;
    let (control, dimension) = match arguments.control {
        ControlWord::Supply => (Control::Supply, Dimension::Voltage),
        ControlWord::Width => (Control::Width, Dimension::Ratio),
    };
    let full = Sweep::full(&network, control, arguments.points as usize)?;
    let end = |given: &Option<String>, option: &str, default: f64| match given {
        None => Ok(default),
        Some(text) => quantity(dimension)(text)
            .map_err(|error| Failure::new(format!("{option}: given \"{text}\": {error}"))),
    };
    let from = end(&arguments.from, "--from", full.values[0])?;
    let to = end(&arguments.to, "--to", full.values[full.values.len() - 1])?;
    let map = Sweep::even(&network, control, from, to, arguments.points as usize)?
        .solve(&network)
        .map_err(|error| about(&error))?;
    let document = map_document(&stage.title, &map);
    console.print(&map_text(&stage.title, &map))?;
    console.print_json(&document)?;
    if let Some(folder) = folder {
        let figure = map_figure(&stage.title, &map);
        folder.write(names[0], map_csv(&stage.title, &map).as_bytes())?;
        folder.write(names[1], &serde_json::to_vec_pretty(&document)?)?;
        folder.write(names[2], figure.svg()?.as_bytes())?;
        folder.write(names[3], &figure.png()?)?;
        console.remark(&format!(
            "wrote {} into {}",
            names.join(", "),
            folder.display()
        ));
    }
    Ok(Ending::Within)
}
