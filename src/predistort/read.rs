//! Reads a table that was written as JSON.

use std::io::Read;

use super::{Pass, Table};
use crate::drive::{Between, Lookup, LookupSize, Spacing, Word};
use crate::input::{Problem, parse_json, read_text};
use crate::map::Control;

#[derive(serde::Deserialize)]
struct Document {
    kind: String,
    version: u32,
    #[serde(default)]
    title: String,
    full_control: f64,
    full_output_v: Option<f64>,
    #[serde(default)]
    control: ControlWord,
    #[serde(default)]
    passes: Vec<Pass>,
    depth: usize,
    address_bits: u32,
    amplitude_bits: u32,
    phase_bits: u32,
    spacing: SpacingWords,
    between: BetweenWord,
    rate: usize,
    control_words: Vec<u32>,
    phase_words: Vec<i32>,
}

#[derive(Default, serde::Deserialize)]
#[serde(rename_all = "snake_case")]
enum ControlWord {
    #[default]
    Supply,
    Width,
    Drive,
}

#[derive(serde::Deserialize)]
#[serde(tag = "law", rename_all = "snake_case")]
enum SpacingWords {
    Magnitude,
    Power,
    Companded { mu: f64 },
}

#[derive(serde::Deserialize)]
#[serde(rename_all = "snake_case")]
enum BetweenWord {
    Nearest,
    Linear,
}

/// Reads the table in `reader`, which came from `file`.
///
/// # Errors
/// The first thing wrong, with its line where the text is no such document.
pub fn read_table(file: &str, reader: impl Read) -> Result<Table, Problem> {
    let about = |given: String, allowed: &str| Problem::about_file(file, given, allowed);
    let text = read_text(reader)
        .map_err(|error| Problem::unreadable(file, &error, "a table, text in UTF-8"))?;
    let document: Document = parse_json(
        file,
        &text,
        "a table as `quietedge predistort` writes it into table.json",
    )?;
    if document.kind != "static table" || document.version != 1 {
        return Err(about(
            format!("kind \"{}\", version {}", document.kind, document.version),
            "kind \"static table\", version 1",
        ));
    }
    if !(document.full_control > 0.0 && document.full_control.is_finite()) {
        return Err(about(
            format!("full_control = {}", document.full_control),
            "a positive finite number",
        ));
    }
    if document.control_words.len() != document.phase_words.len() {
        return Err(about(
            format!(
                "{} control words and {} phase words",
                document.control_words.len(),
                document.phase_words.len()
            ),
            "equally many",
        ));
    }
    let words = document.control_words.iter().zip(&document.phase_words);
    let lookup = Lookup::new(
        LookupSize {
            depth: document.depth,
            address_bits: document.address_bits,
            amplitude_bits: document.amplitude_bits,
            phase_bits: document.phase_bits,
        },
        match document.spacing {
            SpacingWords::Magnitude => Spacing::Magnitude,
            SpacingWords::Power => Spacing::Power,
            SpacingWords::Companded { mu } => Spacing::Companded { mu },
        },
        match document.between {
            BetweenWord::Nearest => Between::Nearest,
            BetweenWord::Linear => Between::Linear,
        },
        document.rate,
        words
            .map(|(&control, &phase)| Word { control, phase })
            .collect(),
    )
    .map_err(|error| about(error.to_string(), "a table whose words fit its sizes"))?;
    Ok(Table {
        lookup,
        entries: Vec::new(),
        full_control: document.full_control,
        control: match document.control {
            ControlWord::Supply => Control::Supply,
            ControlWord::Width => Control::Width,
            ControlWord::Drive => Control::Drive,
        },
        passes: document.passes,
        full_output_v: document.full_output_v,
        title: document.title,
    })
}
