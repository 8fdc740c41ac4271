//! A design as text and as a document.

use serde_json::{Value, json};

use super::table::{Align, Table};
use super::text::{quantity, zeroed};
use crate::design::{BestEffort, Design, HIGHEST_RATIO, Match, Parts, Series, Zero};
use crate::orbit::Orbit;

/// A stage of parts that are sold, beside the exact one.
#[derive(Debug, Clone)]
pub struct Rounded {
    /// Which values.
    pub series: Series,
    /// The parts.
    pub parts: Parts,
    /// What they do.
    pub orbit: Orbit,
}

/// The word of a series on the command line and in documents.
pub fn series_word(series: Series) -> &'static str {
    match series {
        Series::E12 => "E12",
        Series::E24 => "E24",
        Series::E96 => "E96",
    }
}

/// The parts by name, with values in words.
fn part_rows(parts: &Parts, device_f: f64) -> Vec<(&'static str, String)> {
    let mut rows = vec![
        (
            "drain capacitance",
            format!(
                "{}, of which {} beside the device's fixed part",
                quantity(parts.drain_f, "F", 4),
                quantity((parts.drain_f - device_f).max(0.0), "F", 4)
            ),
        ),
        (
            "feed",
            parts
                .feed_h
                .map_or("ideal choke".to_owned(), |henry| quantity(henry, "H", 4)),
        ),
        ("series inductor", quantity(parts.series_h, "H", 4)),
        ("series capacitor", quantity(parts.series_f, "F", 4)),
    ];
    match parts.matching {
        Match::None => rows.push((
            "match",
            "none: the load is what the stage must see".to_owned(),
        )),
        Match::Up { shunt_f } => rows.push(("across the load", quantity(shunt_f, "F", 4))),
        Match::Down { shunt_f, load_h } => {
            rows.push(("across the resonator", quantity(shunt_f, "F", 4)));
            rows.push(("in series with the load", quantity(load_h, "H", 4)));
        }
    }
    rows
}

/// What a stage does, as cells of one column.
fn column(orbit: &Orbit) -> [String; 8] {
    [
        quantity(orbit.output_w, "W", 4),
        format!("{:.2} %", 100.0 * orbit.efficiency),
        quantity(orbit.supply_a, "A", 4),
        quantity(orbit.switch_peak_v, "V", 4),
        quantity(zeroed(orbit.switch_min_v, orbit.supply_v), "V", 3),
        quantity(orbit.switch_peak_a, "A", 4),
        quantity(zeroed(orbit.closing_v, orbit.supply_v), "V", 3),
        format!("{:.1} dBc", orbit.harmonics_dbc[0]),
    ]
}

const COLUMN_NAMES: [&str; 8] = [
    "output power",
    "efficiency",
    "supply current",
    "peak drain voltage",
    "lowest drain voltage",
    "peak switch current",
    "drain at closing",
    "harmonic 2",
];

/// How the search ended, in a sentence.
fn outcome(design: &Design) -> String {
    match &design.zero {
        Zero::Reached { evaluations } => format!(
            "zero voltage and zero slope at closing, with the losses and the loaded Q as stated ({evaluations} orbits solved)"
        ),
        Zero::BestEffort(BestEffort::TooMuchCapacitance { needed_f, device_f }) => {
            let needed = needed_f.map_or("less".to_owned(), |farad| {
                format!("{} at most", quantity(farad.max(0.0), "F", 4))
            });
            format!(
                "no zero voltage possible: the device brings {} to the drain, the stage may have {needed}. This is the most efficient stage of the wanted power that was found with it: best effort, off nominal",
                quantity(*device_f, "F", 4)
            )
        }
    }
}

/// The design for the terminal.
pub fn design_text(design: &Design, rounded: Option<&Rounded>) -> String {
    let targets = &design.targets;
    let device_f = targets.device.drain_f;
    let mut text = format!(
        "{}: {} at {} from {}, closed {:.1} % of the period, into {}\n{}\n",
        targets.title,
        quantity(targets.output_w, "W", 4),
        quantity(targets.frequency_hz, "Hz", 6),
        quantity(targets.supply_v, "V", 4),
        100.0 * targets.duty,
        quantity(targets.load_ohm, "ohm", 4),
        outcome(design)
    );
    let mut parts = Table::new([
        ("part", Align::Left),
        ("value", Align::Left),
        ("", Align::Left),
    ]);
    let others = rounded
        .map(|rounded| part_rows(&rounded.parts, device_f))
        .unwrap_or_default();
    for (index, (name, value)) in part_rows(&design.parts, device_f).into_iter().enumerate() {
        let other = others
            .get(index)
            .map(|(_, value)| value.clone())
            .unwrap_or_default();
        parts.row([name.to_owned(), value, other]);
    }
    text.push_str(&format!("\n{}\n", parts.text()));
    let names = [
        "",
        "exact",
        rounded.map_or("", |rounded| series_word(rounded.series)),
    ];
    let aligns = [Align::Left, Align::Right, Align::Right];
    let mut results = Table::new(names.into_iter().zip(aligns));
    let exact = column(&design.orbit);
    let other = rounded.map(|rounded| column(&rounded.orbit));
    for (index, name) in COLUMN_NAMES.into_iter().enumerate() {
        let beside = other
            .as_ref()
            .map(|cells| cells[index].clone())
            .unwrap_or_default();
        results.row([name.to_owned(), exact[index].clone(), beside]);
    }
    text.push_str(&format!("\n{}\n", results.text()));
    text.push_str(&format!(
        "\nThe device must stand {} and {}.",
        quantity(design.orbit.switch_peak_v, "V", 3),
        quantity(design.orbit.switch_peak_a, "A", 3)
    ));
    if let Some(hertz) = design.highest_frequency_hz {
        text.push_str(&format!(
            " Its capacitance allows an ideal stage of this power and supply up to {} (feed ratio {HIGHEST_RATIO}; less with losses).",
            quantity(hertz, "Hz", 4)
        ));
    }
    text
}

fn parts_document(parts: &Parts) -> Value {
    let (shunt_f, load_h) = match parts.matching {
        Match::None => (None, None),
        Match::Up { shunt_f } => (Some(shunt_f), None),
        Match::Down { shunt_f, load_h } => (Some(shunt_f), Some(load_h)),
    };
    json!({
        "drain_f": parts.drain_f,
        "feed_h": parts.feed_h,
        "series_h": parts.series_h,
        "series_f": parts.series_f,
        "shunt_f": shunt_f,
        "load_h": load_h,
    })
}

/// The document of `quietedge design`; `orbit` documents are those of `quietedge solve`.
pub fn design_document(design: &Design, rounded: Option<&Rounded>) -> Value {
    use super::documents::solve_document;
    let targets = &design.targets;
    let reached = matches!(design.zero, Zero::Reached { .. });
    json!({
        "title": targets.title,
        "frequency_hz": targets.frequency_hz,
        "output_w": targets.output_w,
        "supply_v": targets.supply_v,
        "duty": targets.duty,
        "load_ohm": targets.load_ohm,
        "loaded_q": targets.loaded_q,
        "outcome": if reached { "zero_voltage_and_slope" } else { "best_effort" },
        "reason": outcome(design),
        "parts": parts_document(&design.parts),
        "orbit": solve_document(&design.stage, &design.orbit, &[])["orbit"],
        "highest_frequency_hz": design.highest_frequency_hz,
        "rounded": rounded.map(|rounded| json!({
            "series": series_word(rounded.series),
            "parts": parts_document(&rounded.parts),
            "orbit": solve_document(&design.stage, &rounded.orbit, &[])["orbit"],
        })),
    })
}
