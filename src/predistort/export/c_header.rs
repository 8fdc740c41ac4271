//! A C header (C99) with fixed-point constants.

use std::fmt::Write;

use super::facts;
use crate::drive::{Between, Spacing};
use crate::predistort::Table;

/// Constants a line of an array.
const A_LINE: usize = 12;

/// The narrowest type of `stdint.h` for `bits`.
fn width(bits: u32) -> u32 {
    match bits {
        0..=8 => 8,
        9..=16 => 16,
        _ => 32,
    }
}

/// Sizes as macros, words as two constant arrays. No address is computed: its formula stands in the comment.
pub fn c_header(table: &Table) -> String {
    let (lookup, size) = (&table.lookup, table.lookup.size());
    let mut text = String::from("/* Predistortion table.\n");
    for (key, value) in facts(table) {
        let _ = writeln!(text, " * {key} = {value}");
    }
    text.push_str(
        " * address = round(p (2^ADDRESS_BITS - 1)); entries stand evenly over p.\n \
         * control = word / (2^AMPLITUDE_BITS - 1) of full control; phase = word / 2^PHASE_BITS turns.\n */\n",
    );
    text.push_str(
        "#ifndef PREDISTORTION_TABLE_H\n#define PREDISTORTION_TABLE_H\n\n#include <stdint.h>\n\n",
    );
    let macros = [
        ("DEPTH", size.depth as u64),
        ("ADDRESS_BITS", u64::from(size.address_bits)),
        ("AMPLITUDE_BITS", u64::from(size.amplitude_bits)),
        ("PHASE_BITS", u64::from(size.phase_bits)),
        ("RATE", lookup.rate() as u64),
        (
            "INTERPOLATED",
            u64::from(lookup.between() == Between::Linear),
        ),
        (
            "SPACING",
            match lookup.spacing() {
                Spacing::Magnitude => 0,
                Spacing::Power => 1,
                Spacing::Companded { .. } => 2,
            },
        ),
    ];
    for (name, value) in macros {
        let _ = writeln!(text, "#define PREDISTORTION_{name} {value}");
    }
    text.push_str("/* PREDISTORTION_SPACING: 0 magnitude, 1 power, 2 companded (law above) */\n\n");
    let words = lookup.words();
    let control: Vec<i64> = words.iter().map(|word| i64::from(word.control)).collect();
    let phase: Vec<i64> = words.iter().map(|word| i64::from(word.phase)).collect();
    let unsigned = format!("uint{}_t", width(size.amplitude_bits));
    let signed = format!("int{}_t", width(size.phase_bits));
    for (name, kind, values) in [("control", unsigned, control), ("phase", signed, phase)] {
        let _ = writeln!(
            text,
            "static const {kind} predistortion_{name}[PREDISTORTION_DEPTH] = {{"
        );
        for line in values.chunks(A_LINE) {
            let line: Vec<String> = line.iter().map(i64::to_string).collect();
            let _ = writeln!(text, "    {},", line.join(", "));
        }
        text.push_str("};\n\n");
    }
    text.push_str("#endif\n");
    text
}
