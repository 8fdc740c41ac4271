//! CSV, JSON and NPY.

use std::fmt::Write;

use npyz::WriterBuilder;
use serde_json::{Value, json};

use super::facts;
use crate::map::Control;
use crate::predistort::Table;

/// Lines `# key = value`, then one row an entry: the words, and what they mean.
///
/// Columns: `index`, `magnitude` (of the control's range), `control_word`, `phase_word`, `control_v` (V of a supply; else
/// `control`, a part), `phase_deg`; then, for a table made here, `exact_control_v`, `exact_phase_deg` (before rounding) and `state`.
pub fn csv(table: &Table) -> String {
    let mut text = String::new();
    for (key, value) in facts(table) {
        let _ = writeln!(text, "# {key} = {value}");
    }
    let exact = !table.entries.is_empty();
    let unit = match table.control {
        Control::Supply => "_v",
        Control::Width | Control::Drive | Control::Angle => "",
    };
    let _ = write!(
        text,
        "index,magnitude,control_word,phase_word,control{unit},phase_deg"
    );
    if exact {
        let _ = write!(text, ",exact_control{unit},exact_phase_deg,state");
    }
    text.push('\n');
    for (index, &word) in table.lookup.words().iter().enumerate() {
        let _ = write!(
            text,
            "{index},{},{},{},{},{}",
            table.lookup.magnitude(index),
            word.control,
            word.phase,
            table.lookup.control(word) * table.full_control,
            table.lookup.phase_rad(word).to_degrees(),
        );
        if let Some(entry) = table.entries.get(index) {
            let state = serde_json::to_value(entry.state).unwrap_or_default();
            let _ = write!(
                text,
                ",{},{},{}",
                entry.control * table.full_control,
                entry.phase_rad.to_degrees(),
                state.as_str().unwrap_or_default(),
            );
        }
        text.push('\n');
    }
    text
}

/// The document that a study names as `[predistort] table = "table.json"`.
pub fn json(table: &Table) -> Value {
    let (lookup, size) = (&table.lookup, table.lookup.size());
    let words = lookup.words();
    json!({
        "kind": "static table",
        "version": 1,
        "title": table.title,
        "control": table.control.name(),
        "full_control": table.full_control,
        "full_output_v": table.full_output_v,
        "depth": size.depth,
        "address_bits": size.address_bits,
        "amplitude_bits": size.amplitude_bits,
        "phase_bits": size.phase_bits,
        "spacing": lookup.spacing(),
        "between": lookup.between(),
        "rate": lookup.rate(),
        "entries": table.counts(),
        "passes": table.passes,
        "control_words": words.iter().map(|word| word.control).collect::<Vec<_>>(),
        "phase_words": words.iter().map(|word| word.phase).collect::<Vec<_>>(),
    })
}

/// 32-bit integers of shape (depth, 2): control word, phase word.
///
/// # Errors
/// None that memory does not give.
pub fn npy(table: &Table) -> std::io::Result<Vec<u8>> {
    let mut bytes = Vec::new();
    let words = table.lookup.words();
    let mut writer = npyz::WriteOptions::<i32>::new()
        .default_dtype()
        .shape(&[words.len() as u64, 2])
        .writer(&mut bytes)
        .begin_nd()?;
    for word in words {
        writer.push(&(word.control as i32))?;
        writer.push(&word.phase)?;
    }
    writer.finish()?;
    Ok(bytes)
}
