//! `quietedge map`: the stage over a control.

use std::f64::consts::{FRAC_PI_2, TAU};
use std::path::PathBuf;

use super::arguments::quantity;
use super::ratings::{RatingOptions, ending};
use super::solve::Changes;
use super::{Console, Ending, Failure, OutputFolder, OutputOptions};
use crate::map::{AngleSweep, Control, LoadSweep, Map, Sweep};
use crate::orbit::{Compensation, Joined, Joint, JointKind, Network};
use crate::report::documents::{map_csv, map_document};
use crate::report::mismatch::{load_map_csv, load_map_document, load_map_figure, load_map_text};
use crate::report::stage::{map_figure, map_text};
use crate::report::stress::{add_verdict, stress_text, stressed_loads, stressed_map};
use crate::units::Dimension;
use crate::verdict::{Ratings, Stressed};

/// Solve a stage over its supply, its pulse width or the angle of its load's reflection
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge map signals/tide-gauge.stage.toml --control supply
  quietedge map my.stage.toml --control width --from 0.1 --to 0.5 --points 81
  quietedge map my.stage.toml --control load --vswr 2 --peak-voltage 30V --peak-current 2A
      a whole turn of the load's reflection coefficient; exit code 1 where the switch is beyond a rating
  quietedge map my.stage.toml --control angle --joint floating --compensation 60ohm
      two of the stage on one floating load, the first ahead by the angle and the second behind
  quietedge map my.stage.toml --control supply --out map
      writes map.csv, map.json, map.svg and map.png into map/; a study can name the
      first two in place of a stage: map = \"map/map.csv\"")]
pub struct Arguments {
    /// Stage file (TOML)
    stage: PathBuf,

    /// What is moved over the map
    #[arg(long, value_enum, default_value_t = ControlWord::Supply)]
    control: ControlWord,

    /// First value: volts for supply, a fraction of the period for width, an angle such as 30deg for load
    #[arg(long, value_name = "VALUE", allow_hyphen_values = true)]
    from: Option<String>,

    /// Last value; the stage's own supply or duty, or a whole turn, where absent
    #[arg(long, value_name = "VALUE", allow_hyphen_values = true)]
    to: Option<String>,

    /// Number of evenly spaced values: 201, or 72 for load, where absent
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u32).range(2..=100_001))]
    points: Option<u32>,

    #[command(flatten)]
    changes: Changes,

    #[command(flatten)]
    joint: JointOptions,

    #[command(flatten)]
    ratings: RatingOptions,

    #[command(flatten)]
    output: OutputOptions,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
enum ControlWord {
    /// Supply voltage, from 0 V to the stage's own
    Supply,
    /// Closed fraction of the period, from a fortieth of the stage's own to the whole of it
    Width,
    /// Angle of the load's reflection coefficient at the standing-wave ratio --vswr
    Load,
    /// Angle of two of the stage on one load, from 0 to 90deg: the first ahead, the second behind
    Angle,
}

/// How two of the stage meet on one load.
#[derive(Debug, Clone, clap::Args)]
#[command(next_help_heading = "Two of the stage on one load, for --control angle")]
struct JointOptions {
    /// The load floats between the branches, or stands at their common end
    #[arg(long, value_enum, default_value_t = JointWord::Floating)]
    joint: JointWord,

    /// The common load; twice the stage's own where it floats, half of it at a tee, where absent
    #[arg(long, value_name = "OHM", value_parser = quantity(Dimension::Resistance))]
    joint_resistance: Option<f64>,

    /// Rungs of the ladder in each branch; the others stand once, behind the joint. All where absent
    #[arg(long, value_name = "N")]
    branch_rungs: Option<usize>,

    /// Compensating reactance of each branch to ground: a capacitor in the first, an inductor in the second
    #[arg(long, value_name = "OHM", value_parser = quantity(Dimension::Resistance))]
    compensation: Option<f64>,

    /// After how many rungs of each branch the compensation stands; at its end where absent
    #[arg(long, value_name = "N", requires = "compensation")]
    compensation_after: Option<usize>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
enum JointWord {
    Floating,
    Tee,
}

impl JointOptions {
    fn joint(&self) -> Result<Joint, Failure> {
        let positive = |option: &str, given: Option<f64>| match given {
            Some(value) if value <= 0.0 => {
                let text = format!("{option}: given {value}; allowed: more than 0");
                Err(Failure::new(text))
            }
            given => Ok(given),
        };
        let compensation = positive("--compensation", self.compensation)?;
        Ok(Joint {
            load_ohm: positive("--joint-resistance", self.joint_resistance)?,
            branch_rungs: self.branch_rungs,
            compensation: compensation.map(|reactance_ohm| Compensation {
                reactance_ohm,
                q: None,
                after_rungs: self.compensation_after,
            }),
            ..Joint::new(match self.joint {
                JointWord::Floating => JointKind::Floating,
                JointWord::Tee => JointKind::Tee,
            })
        })
    }
}

/// Runs the command.
///
/// # Errors
/// A stage that cannot be read or solved; files that cannot be written.
pub fn run(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    match arguments.control {
        ControlWord::Supply => by_control(arguments, Control::Supply, Dimension::Voltage, console),
        ControlWord::Width => by_control(arguments, Control::Width, Dimension::Ratio, console),
        ControlWord::Load => by_load(arguments, console),
        ControlWord::Angle => by_angle(arguments, console),
    }
}

/// An end of the sweep.
fn end(given: &Option<String>, option: &str, dimension: Dimension) -> Result<Option<f64>, Failure> {
    given
        .as_deref()
        .map(quantity(dimension))
        .transpose()
        .map_err(|error| {
            let given = given.as_deref().unwrap_or_default();
            Failure::new(format!("{option}: given \"{given}\": {error}"))
        })
}

fn by_control(
    arguments: &Arguments,
    control: Control,
    dimension: Dimension,
    console: &Console,
) -> Result<Ending, Failure> {
    let names = ["map.csv", "map.json", "map.svg", "map.png"];
    let folder = OutputFolder::claim_option(&arguments.output, &names)?;
    let ratings = arguments.ratings.ratings()?;
    let stage = arguments.changes.stage(&arguments.stage)?;
    let about = |error: &dyn std::fmt::Display| {
        Failure::new(format!("{}: {error}", arguments.stage.display()))
    };
    let network = Network::new(&stage).map_err(|error| about(&error))?;
    let points = arguments.points.unwrap_or(201) as usize;
    let full = Sweep::full(&network, control, points)?;
    let from = end(&arguments.from, "--from", dimension)?.unwrap_or(full.values[0]);
    let to = end(&arguments.to, "--to", dimension)?.unwrap_or(full.values[full.values.len() - 1]);
    let map = Sweep::even(&network, control, from, to, points)?
        .solve(&network)
        .map_err(|error| about(&error))?;
    written(&stage.title, &map, &ratings, folder, &names, console)
}

fn by_angle(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    let names = ["map.csv", "map.json", "map.svg", "map.png"];
    let folder = OutputFolder::claim_option(&arguments.output, &names)?;
    let ratings = arguments.ratings.ratings()?;
    let joint = arguments.joint.joint()?;
    let stage = arguments.changes.stage(&arguments.stage)?;
    let about = |error: &dyn std::fmt::Display| {
        Failure::new(format!("{}: {error}", arguments.stage.display()))
    };
    let joined = Joined::new(&stage, &joint).map_err(|error| about(&error))?;
    let points = arguments.points.unwrap_or(181) as usize;
    let from = end(&arguments.from, "--from", Dimension::Angle)?.unwrap_or(0.0);
    let to = end(&arguments.to, "--to", Dimension::Angle)?.unwrap_or(FRAC_PI_2);
    let map = AngleSweep::even(&joined, from, to, points)?
        .solve(&joined)
        .map_err(|error| about(&error))?;
    let title = format!("Two of: {}", stage.title);
    written(&title, &map, &ratings, folder, &names, console)
}

/// Prints a map and writes its files.
fn written(
    title: &str,
    map: &Map,
    ratings: &Ratings,
    folder: Option<OutputFolder>,
    names: &[&str; 4],
    console: &Console,
) -> Result<Ending, Failure> {
    let mut document = map_document(title, map);
    console.print(&map_text(title, map))?;
    let ending = stress(
        ratings,
        &stressed_map(map),
        map.failures().len(),
        &mut document,
        console,
    )?;
    console.print_json(&document)?;
    if let Some(folder) = folder {
        let figure = map_figure(title, map);
        folder.write(names[0], map_csv(title, map).as_bytes())?;
        folder.write(names[1], &serde_json::to_vec_pretty(&document)?)?;
        folder.write(names[2], figure.svg()?.as_bytes())?;
        folder.write(names[3], &figure.png()?)?;
        wrote(names, &folder, console);
    }
    Ok(ending)
}

fn by_load(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    let names = [
        "load-map.csv",
        "load-map.json",
        "load-map.svg",
        "load-map.png",
        "load-wheel.svg",
        "load-wheel.png",
    ];
    let folder = OutputFolder::claim_option(&arguments.output, &names)?;
    let ratings = arguments.ratings.ratings()?;
    let vswr = arguments.changes.swept_vswr()?;
    let stage = arguments.changes.stage_at_own_load(&arguments.stage)?;
    let points = arguments.points.unwrap_or(72) as usize;
    let angle = |given, option| end(given, option, Dimension::Angle);
    let (from, to) = (
        angle(&arguments.from, "--from")?,
        angle(&arguments.to, "--to")?,
    );
    let sweep = match (from, to) {
        (None, None) => LoadSweep::turn(vswr, points)?,
        (from, to) => {
            let from = from.unwrap_or(0.0);
            LoadSweep::between(vswr, from, to.unwrap_or(from + TAU), points)?
        }
    };
    let bar = console.progress(sweep.angles_rad.len() as u64, "loads");
    let map = sweep
        .solve(&stage, || bar.inc(1))
        .map_err(|error| Failure::new(format!("{}: {error}", arguments.stage.display())))?;
    bar.finish_and_clear();
    let mut document = load_map_document(&stage, &map);
    console.print(&load_map_text(&stage, &map, &ratings))?;
    let ending = stress(
        &ratings,
        &stressed_loads(&map),
        map.failures.len(),
        &mut document,
        console,
    )?;
    console.print_json(&document)?;
    if let Some(folder) = folder {
        let figure = load_map_figure(&stage, &map, &ratings);
        let (over, around) = (figure.figure(), figure.wheel());
        let csv = load_map_csv(&stage, &map, &ratings);
        folder.write(names[0], csv.as_bytes())?;
        folder.write(names[1], &serde_json::to_vec_pretty(&document)?)?;
        folder.write(names[2], over.svg()?.as_bytes())?;
        folder.write(names[3], &over.png()?)?;
        folder.write(names[4], around.svg()?.as_bytes())?;
        folder.write(names[5], &around.png()?)?;
        wrote(&names, &folder, console);
    }
    Ok(ending)
}

/// Prints how the points stand against the ratings and adds it to the document.
fn stress(
    ratings: &Ratings,
    points: &[Stressed],
    failed: usize,
    document: &mut serde_json::Value,
    console: &Console,
) -> Result<Ending, Failure> {
    if ratings.is_empty() {
        return Ok(Ending::Within);
    }
    let verdict = ratings.verdict(points, failed);
    console.print(&format!("\n{}", stress_text(&verdict)))?;
    add_verdict(document, ratings, &verdict, points);
    Ok(ending(&verdict))
}

fn wrote(names: &[&str], folder: &OutputFolder, console: &Console) {
    console.remark(&format!(
        "wrote {} into {}",
        names.join(", "),
        folder.display()
    ));
}
