//! `quietedge limits`.

use std::path::{Path, PathBuf};

use serde::Serialize;

use super::disk::Disk;
use super::{Console, Ending, Failure, OutputFolder, OutputOptions};
use crate::input::{Files, Problem};
use crate::limits::{
    Conditions, Corner, Evaluated, Kind, Library, LimitSet, Limits, Mask, Obtained, Segment, Term,
    evaluate, table_rows,
};
use crate::report::limits::limits_figure;
use crate::units::{self, Dimension, show};

/// List the limit sets, or show one of them with where its numbers come from
#[derive(Debug, clap::Args)]
#[command(after_help = "Examples:
  quietedge limits
  quietedge limits fcc_90_210_mask_d --power 5W --out mask
      writes limits.svg, limits.png and limits.json into mask/
  quietedge limits --file my.limits.toml
  quietedge limits my_mask --file my.limits.toml")]
pub struct Arguments {
    /// The set to show; without it, all are listed
    name: Option<String>,

    /// A limits file of your own, whose sets join the published ones; may be repeated
    #[arg(long, value_name = "FILE")]
    file: Vec<PathBuf>,

    /// Mean output power, to evaluate limits that depend on it: "5 W", "37 dBm"
    #[arg(long, value_name = "POWER", value_parser = power_w)]
    power: Option<f64>,

    /// Authorized bandwidth, for offsets that are fractions of it: "20 kHz"
    #[arg(long, value_name = "WIDTH", value_parser = width_hz)]
    authorized_bandwidth: Option<f64>,

    /// Channel width, for offsets that count from its edge: "5 MHz"
    #[arg(long, value_name = "WIDTH", value_parser = width_hz)]
    channel: Option<f64>,

    /// Show only the rows for this class of equipment
    #[arg(long, value_name = "WORD")]
    class: Option<String>,

    #[command(flatten)]
    output: OutputOptions,
}

fn power_w(text: &str) -> Result<f64, String> {
    units::parse(text, Dimension::Level)
        .ok()
        .filter(|_| text.trim().ends_with(['W', 'm']))
        .map(units::watt_from_dbm)
        .ok_or_else(|| "a power with its unit is wanted, such as \"5 W\" or \"37 dBm\"".to_owned())
}

fn width_hz(text: &str) -> Result<f64, String> {
    units::parse(text, Dimension::Frequency)
        .ok()
        .filter(|hz| *hz > 0.0)
        .ok_or_else(|| "a width above 0 Hz is wanted, such as \"20 kHz\"".to_owned())
}

/// Runs the command.
pub fn run(arguments: &Arguments, console: &Console) -> Result<Ending, Failure> {
    let mut library = Library::published()?;
    for path in &arguments.file {
        add(&mut library, path)?;
    }
    let names = ["limits.svg", "limits.png", "limits.json"];
    match &arguments.name {
        None if arguments.output.out.is_some() => {
            return Err(Failure::new("--out: name the set whose picture is wanted"));
        }
        None => {
            let sets: Vec<Listed<'_>> = library.sets().iter().map(Listed::of).collect();
            console.print_json(&serde_json::json!({ "sets": sets }))?;
            console.print(&listing(library.sets()))?;
        }
        Some(name) => {
            let set = library.find(name)?;
            let class = arguments.class.as_deref();
            if class.is_some() {
                Limits {
                    classes: class.map(str::to_owned).into_iter().collect(),
                    // Only the class is held against the set; the rest is shown open.
                    channel_hz: arguments.channel,
                    authorized_bandwidth_hz: arguments.authorized_bandwidth.or(Some(1.0)),
                    ..Limits::of_set(set.clone())
                }
                .complete()
                .or_else(|unmet| {
                    if unmet.key == "class" {
                        Err(unmet)
                    } else {
                        Ok(())
                    }
                })?;
            }
            let conditions = Conditions {
                power_w: arguments.power,
                authorized_bandwidth_hz: arguments.authorized_bandwidth,
                channel_hz: arguments.channel,
                ..Conditions::default()
            };
            let mut document = serde_json::to_value(set)?;
            if let (Kind::Mask(mask), Some(object)) = (&set.kind, document.as_object_mut()) {
                let levels: Vec<Evaluated> = mask
                    .segments
                    .iter()
                    .filter_map(|segment| evaluate(mask, segment, &conditions).ok())
                    .collect();
                object.insert("evaluated".to_owned(), serde_json::to_value(levels)?);
            }
            let folder = OutputFolder::claim_option(&arguments.output, &names)?;
            if let Some(folder) = folder {
                let figure = limits_figure(set, class, &conditions)
                    .map_err(|error| Failure::new(format!("no picture of {name}: {error}")))?
                    .ok_or_else(|| {
                        Failure::new(format!(
                            "{name} limits no levels over the offset: nothing to draw"
                        ))
                    })?;
                folder.write(names[0], figure.svg()?.as_bytes())?;
                folder.write(names[1], &figure.png()?)?;
                folder.write(names[2], &serde_json::to_vec_pretty(&document)?)?;
                console.remark(&format!(
                    "wrote {} into {}",
                    names.join(", "),
                    folder.display()
                ));
            }
            console.print_json(&document)?;
            console.print(&page(set, class, &conditions))?;
        }
    }
    Ok(Ending::Within)
}

fn add(library: &mut Library, path: &Path) -> Result<(), Failure> {
    let shown = path.display().to_string();
    let text = Disk::here()
        .text(&shown)
        .map_err(|error| Problem::unreadable(&shown, &error, "a limits file, TOML in UTF-8"))?;
    library.add(&shown, &text)?;
    Ok(())
}

/// One set in the listing.
#[derive(Debug, Serialize)]
struct Listed<'a> {
    name: &'a str,
    title: &'a str,
    kind: &'static str,
    source: &'a str,
    obtained: &'static str,
    confidence: Option<&'static str>,
    memory_parts: &'a [String],
}

impl<'a> Listed<'a> {
    fn of(set: &'a LimitSet) -> Self {
        let provenance = &set.provenance;
        Self {
            name: &set.name,
            title: &set.title,
            kind: set.kind.word(),
            source: &provenance.source,
            obtained: provenance.obtained.word(),
            confidence: provenance.confidence.map(|confidence| confidence.word()),
            memory_parts: &provenance.memory_parts,
        }
    }
}

const GROUPS: [(&str, &str); 5] = [
    ("mask", "Emission masks"),
    ("adjacent", "Power in neighbouring channels"),
    ("modulation", "Modulation accuracy"),
    ("spurious", "Emissions far from the carrier"),
    ("signal", "Facts about signals (limit nothing)"),
];

fn listing(sets: &[LimitSet]) -> String {
    let width = sets.iter().map(|set| set.name.len()).max().unwrap_or(0);
    let trust_width = sets.iter().map(|set| trust(set).len()).max().unwrap_or(0);
    let mut text = String::new();
    for (kind, heading) in GROUPS {
        let members = sets.iter().filter(|set| set.kind.word() == kind);
        let rows: Vec<String> = members
            .map(|set| {
                format!(
                    "{} {:width$}  {:<trust_width$}  {}",
                    mark(set),
                    set.name,
                    trust(set),
                    set.title
                )
            })
            .collect();
        if !rows.is_empty() {
            text.push_str(&format!("{heading}\n{}\n\n", rows.join("\n")));
        }
    }
    text.push_str(
        "! not read in the document itself: check before relying on it   ~ a part recalled\nquietedge limits NAME shows one set. None replaces the document it names.",
    );
    text
}

fn mark(set: &LimitSet) -> char {
    match set.provenance.obtained {
        Obtained::Memory | Obtained::SecondHand => '!',
        Obtained::Read if !set.provenance.memory_parts.is_empty() => '~',
        Obtained::Read | Obtained::Own => ' ',
    }
}

fn trust(set: &LimitSet) -> String {
    let obtained = set.provenance.obtained.word();
    match set.provenance.confidence {
        Some(confidence) => format!("{obtained}, {} confidence", confidence.word()),
        None => obtained.to_owned(),
    }
}

fn page(set: &LimitSet, class: Option<&str>, conditions: &Conditions) -> String {
    let provenance = &set.provenance;
    let mut lines = vec![format!("{}: {}", set.name, set.title)];
    let mut fact = |name: &str, value: &str| {
        if !value.is_empty() {
            lines.push(format!("  {name:<12} {value}"));
        }
    };
    fact("kind", set.kind.word());
    fact("source", &provenance.source);
    fact("clause", &provenance.clause);
    fact("edition", &provenance.edition);
    fact("obtained", &trust(set));
    fact(
        "text read",
        provenance.source_kind.as_deref().unwrap_or_default(),
    );
    fact("recalled", &provenance.memory_parts.join(", "));
    fact(
        "cross-check",
        provenance.cross_checked.as_deref().unwrap_or_default(),
    );
    if let Kind::Mask(mask) = &set.kind {
        fact("reference", mask.reference.words());
        fact("offsets from", mask.origin.words());
        fact("detector", mask.detector.words());
        let width = |hz: Option<f64>| hz.map(|hz| show(hz, "Hz", 6)).unwrap_or_default();
        fact("channel", &width(mask.channel_hz));
        fact(
            "AB",
            &width(
                mask.authorized_bandwidth_hz
                    .or(conditions.authorized_bandwidth_hz),
            ),
        );
        fact(
            "floor",
            &mask
                .floor_dbm
                .map(|dbm| format!("{dbm} dBm"))
                .unwrap_or_default(),
        );
    }
    lines.push(String::new());
    lines.push(table(&table_rows(set, class, conditions)));
    if let Kind::Mask(mask) = &set.kind {
        lines.extend(legend(mask));
    }
    if !provenance.notes.is_empty() {
        lines.push(String::new());
        lines.extend(provenance.notes.iter().map(|note| format!("- {note}")));
    }
    lines.join("\n")
}

fn legend(mask: &Mask) -> Vec<String> {
    let mut lines = Vec::new();
    let fractions = mask
        .segments
        .iter()
        .any(|segment| matches!(segment.from, Corner::Fraction(_)));
    if fractions {
        lines.push("AB: authorized bandwidth (--authorized-bandwidth)".to_owned());
    }
    let depends = |segment: &Segment| {
        segment
            .terms
            .iter()
            .any(|term| matches!(term, Term::Power { .. }))
    };
    if mask.segments.iter().any(depends) {
        lines.push("P: mean output power in W (--power)".to_owned());
    }
    lines
}

/// Columns as wide as their widest cell; a row of one cell is a remark below the table.
fn table(rows: &[Vec<String>]) -> String {
    let columns = rows.first().map_or(0, Vec::len);
    let width = |column: usize| {
        rows.iter()
            .filter(|row| row.len() > 1)
            .filter_map(|row| row.get(column))
            .map(|cell| cell.chars().count())
            .max()
            .unwrap_or(0)
    };
    // A column that holds nothing but its heading says nothing.
    let filled = |column: usize| {
        rows.iter()
            .skip(1)
            .filter(|row| row.len() > 1)
            .any(|row| row.get(column).is_some_and(|cell| !cell.is_empty()))
    };
    let kept: Vec<(usize, usize)> = (0..columns)
        .filter(|column| filled(*column))
        .map(|column| (column, width(column)))
        .collect();
    let mut lines = Vec::new();
    for (at, row) in rows.iter().enumerate() {
        if row.len() == 1 {
            lines.push(row[0].clone());
            continue;
        }
        let cells: Vec<String> = kept
            .iter()
            .map(|(column, width)| {
                let cell = row.get(*column).map_or("", String::as_str);
                format!("{cell:width$}")
            })
            .collect();
        lines.push(cells.join("   ").trim_end().to_owned());
        if at == 0 {
            let rules: Vec<String> = kept.iter().map(|(_, width)| "-".repeat(*width)).collect();
            lines.push(rules.join("   "));
        }
    }
    lines.join("\n")
}
