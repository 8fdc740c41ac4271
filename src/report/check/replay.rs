//! Replay and map side by side.

use super::outcome;
use crate::report::page::{DataTable, FactGroup};
use crate::report::table::{Align, Table};
use crate::report::text::{quantity, signed_decimals};
use crate::study::{Band, By, CheckResult, Metrics, ReplayFacts};

/// Headers of the numbers in both.
const NUMBERS: [(&str, Align); 4] = [
    ("", Align::Left),
    ("by map", Align::Right),
    ("by replay", Align::Right),
    ("difference", Align::Right),
];

/// Headers of the spectra in bands.
const BANDS: [(&str, Align); 4] = [
    ("offsets", Align::Right),
    ("by map", Align::Right),
    ("by replay", Align::Right),
    ("difference", Align::Right),
];

/// What was replayed and how far the map is from it, one statement a row.
fn rows(result: &CheckResult, facts: &ReplayFacts) -> Vec<(String, String)> {
    let own = |name: &str, value: String| (name.to_owned(), value);
    vec![
        own(
            "map against replay",
            facts.statement(result.judgement.verdict.outcome),
        ),
        own(
            "difference of their outputs",
            format!(
                "NMSE {:.1} dB; the replay {} later and {} dB stronger, which were taken off",
                facts.nmse_db,
                quantity(facts.delay_s, "s", 3),
                signed_decimals(facts.gain_db, 3)
            ),
        ),
        own("spectra", parting(facts)),
        own("carrier cycles replayed", facts.cycles.to_string()),
    ]
}

fn parting(facts: &ReplayFacts) -> String {
    let widest = facts.parting.widest.map_or(String::new(), |band| {
        format!(
            "; they differ most from {}: {} dB",
            offsets(&band),
            signed_decimals(band.difference_db(), 2)
        )
    });
    match facts.parting.from_hz {
        None => format!("nowhere more than 1 dB apart{widest}"),
        Some(hz) => format!(
            "more than 1 dB apart from {} off the carrier on{widest}",
            quantity(hz, "Hz", 3)
        ),
    }
}

fn offsets(band: &Band) -> String {
    format!(
        "{} to {}",
        quantity(band.from_hz, "Hz", 3),
        quantity(band.to_hz, "Hz", 3)
    )
}

/// Margins and numbers in both.
fn number_rows(result: &CheckResult, facts: &ReplayFacts) -> Vec<[String; 4]> {
    let mut rows = vec![[
        "verdict".to_owned(),
        outcome(facts.map.judgement.verdict.outcome)
            .word()
            .to_owned(),
        outcome(result.judgement.verdict.outcome).word().to_owned(),
        String::new(),
    ]];
    let shown = |value: Option<f64>, unit: &str, digits: usize| {
        value.map_or("-".to_owned(), |value| format!("{value:.digits$} {unit}"))
    };
    let mut row = |name: String, map: Option<f64>, replay: Option<f64>, unit: &str, digits| {
        let difference = map.zip(replay).map(|(map, replay)| replay - map);
        rows.push([
            name,
            shown(map, unit, digits),
            shown(replay, unit, digits),
            difference.map_or("-".to_owned(), |value| {
                format!("{} {unit}", signed_decimals(value, digits))
            }),
        ]);
    };
    for pair in &facts.margins {
        let name = format!("margin of {}", pair.name);
        row(name, pair.map_db, pair.replay_db, "dB", 2);
    }
    let (map, replay) = (&facts.map.metrics, &result.metrics);
    let percent = |part: Option<f64>| part.map(|part| 100.0 * part);
    let mut both = |name: &str, of: &dyn Fn(&Metrics) -> Option<f64>, unit: &str, digits| {
        row(name.to_owned(), of(map), of(replay), unit, digits);
    };
    both("output power", &|m| Some(m.power_dbm), "dBm", 3);
    both("EVM", &|m| Some(m.evm_percent), "%", 3);
    both("NMSE", &|m| Some(m.nmse_db), "dB", 2);
    both("efficiency", &|m| percent(m.efficiency), "%", 2);
    both(
        "of the stage alone",
        &|m| percent(m.stage_efficiency),
        "%",
        2,
    );
    for (at, pair) in replay.acpr.iter().enumerate() {
        let hz = quantity(pair.offset_hz, "Hz", 4);
        let side = |upper: bool| {
            move |m: &Metrics| {
                let pair = m.acpr.get(at)?;
                Some(if upper { pair.upper_db } else { pair.lower_db })
            }
        };
        both(&format!("ACPR at -{hz}"), &side(false), "dB", 2);
        both(&format!("ACPR at +{hz}"), &side(true), "dB", 2);
    }
    rows
}

fn band_rows(facts: &ReplayFacts) -> Vec<[String; 4]> {
    let bands = facts.parting.bands.iter();
    bands
        .map(|band| {
            [
                offsets(band),
                format!("{:.2} dBm", band.map_dbm),
                format!("{:.2} dBm", band.replay_dbm),
                format!("{} dB", signed_decimals(band.difference_db(), 2)),
            ]
        })
        .collect()
}

/// For the terminal; nothing where all is by map.
pub(super) fn text(result: &CheckResult) -> String {
    let Some(facts) = &result.replay else {
        return String::new();
    };
    let mut text = "\nReplay\n".to_owned();
    for (name, value) in rows(result, facts) {
        text.push_str(&format!("{name}: {value}\n"));
    }
    if facts.by == By::Both {
        let mut table = Table::new(NUMBERS);
        for row in number_rows(result, facts) {
            table.row(row);
        }
        let mut bands = Table::new(BANDS);
        for row in band_rows(facts) {
            bands.row(row);
        }
        text.push_str(&format!("\nMap and replay\n{}\n", table.text()));
        text.push_str(&format!("\nSpectra in bands\n{}\n", bands.text()));
    }
    text
}

/// For the page.
pub(super) fn facts(result: &CheckResult) -> Option<FactGroup> {
    let facts = result.replay.as_ref()?;
    Some(FactGroup {
        title: "Replay".to_owned(),
        rows: rows(result, facts),
    })
}

/// For the page.
pub(super) fn tables(result: &CheckResult) -> Vec<DataTable> {
    let Some(facts) = result.replay.as_ref().filter(|facts| facts.by == By::Both) else {
        return Vec::new();
    };
    let named = |columns: [(&str, Align); 4]| {
        columns
            .map(|(name, align)| (name.to_owned(), align))
            .to_vec()
    };
    vec![
        DataTable {
            title: "Map and replay".to_owned(),
            columns: named(NUMBERS),
            rows: number_rows(result, facts)
                .into_iter()
                .map(Vec::from)
                .collect(),
        },
        DataTable {
            title: "Spectra of map and replay in bands".to_owned(),
            columns: named(BANDS),
            rows: band_rows(facts).into_iter().map(Vec::from).collect(),
        },
    ]
}
