//! Tables as files that a front end loads. Each is described in `docs/exports.md`.

mod c_header;
mod hex_image;
mod text;

pub use c_header::c_header;
pub use hex_image::hex_image;
pub use text::{csv, json, npy};

use super::Table;
use crate::drive::{Between, Spacing};

/// What the files say about a table in a comment, as (key, value).
fn facts(table: &Table) -> Vec<(&'static str, String)> {
    let (lookup, size) = (&table.lookup, table.lookup.size());
    let spacing = match lookup.spacing() {
        Spacing::Magnitude => "magnitude, p = m".to_owned(),
        Spacing::Power => "power, p = m^2".to_owned(),
        Spacing::Companded { mu } => format!("companded, p = ln(1 + {mu} m) / ln(1 + {mu})"),
    };
    let between = match lookup.between() {
        Between::Nearest => "nearest entry",
        Between::Linear => "straight lines",
    };
    let mut facts = vec![
        ("title", one_line(&table.title)),
        ("depth", size.depth.to_string()),
        ("spacing", spacing),
        ("between entries", between.to_owned()),
        ("address bits", size.address_bits.to_string()),
        ("amplitude bits", size.amplitude_bits.to_string()),
        ("phase bits", size.phase_bits.to_string()),
        ("rate", format!("{} times the signal's", lookup.rate())),
        ("full control", {
            let (full, unit) = (table.full_control, table.control.unit());
            format!("{full} {unit}").trim_end().to_owned()
        }),
    ];
    if let Some(full_output_v) = table.full_output_v {
        facts.push(("full output", format!("{full_output_v} V peak")));
    }
    facts
}

/// `text` where a line break or the end of a comment would do harm.
fn one_line(text: &str) -> String {
    text.chars()
        .map(|c| if c.is_control() { ' ' } else { c })
        .collect::<String>()
        .replace("*/", "* /")
}
