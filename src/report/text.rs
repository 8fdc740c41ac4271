//! Text on its way into SVG, HTML and the terminal.

use crate::units;

/// `text` without characters that XML forbids (controls, non-characters) and without
/// direction overrides, which could make a label read backwards; line breaks and tabs become spaces.
pub fn clean(text: &str) -> String {
    text.chars()
        .map(|c| match c {
            '\n' | '\r' | '\t' => ' ',
            c if c.is_control() => '\u{fffd}',
            '\u{fffe}' | '\u{ffff}' | '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}' => {
                '\u{fffd}'
            }
            c => c,
        })
        .collect()
}

/// `text` cleaned, with the five characters of markup escaped; safe in content and in quoted attributes.
pub fn escape(text: &str) -> String {
    let mut escaped = String::with_capacity(text.len());
    push_escaped(&mut escaped, &clean(text));
    escaped
}

/// As [`escape`], but line breaks stay.
pub fn escape_lines(text: &str) -> String {
    let mut escaped = String::with_capacity(text.len());
    for (index, line) in text.lines().enumerate() {
        if index > 0 {
            escaped.push('\n');
        }
        push_escaped(&mut escaped, &clean(&line.replace('\t', "    ")));
    }
    escaped
}

fn push_escaped(out: &mut String, text: &str) {
    for c in text.chars() {
        match c {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '"' => out.push_str("&quot;"),
            '\'' => out.push_str("&#39;"),
            c => out.push(c),
        }
    }
}

/// Unit symbols, with prefixes where they are usual, that must not stand alone at the start of a line.
const UNITS: [&str; 23] = [
    "%", "dB", "dBm", "dBc", "dBr", "V", "mV", "kV", "A", "mA", "W", "mW", "kW", "Hz", "kHz",
    "MHz", "GHz", "s", "ms", "us", "ns", "deg", "ohm",
];

/// `text` with no-break spaces between numbers and their units.
pub fn keep_units(text: &str) -> String {
    let mut kept = String::with_capacity(text.len());
    for word in text.split(' ') {
        if !kept.is_empty() {
            let bare = word.trim_end_matches(['.', ',', ';', ':', ')']);
            let joins = kept.ends_with(|c: char| c.is_ascii_digit()) && UNITS.contains(&bare);
            kept.push(if joins { '\u{a0}' } else { ' ' });
        }
        kept.push_str(word);
    }
    kept
}

/// A quantity with a prefix, as [`units::show`]; sizes no hardware has are zero.
pub fn quantity(value: f64, unit: &str, digits: usize) -> String {
    let value = if value.abs() < 1e-24 { 0.0 } else { value };
    units::show(value, unit, digits)
}

/// What rounding leaves of zero, relative to the size of what it is a difference of.
const NUMERIC_ZERO: f64 = 1e-9;

/// `value`, or zero where it is below 1e-9 of `scale`: a designed zero is left at rounding, not at a voltage.
pub fn zeroed(value: f64, scale: f64) -> f64 {
    if value.abs() < NUMERIC_ZERO * scale.abs() {
        0.0
    } else {
        value
    }
}

/// A quantity with its sign always written: `+12.5 kHz`.
pub fn signed(value: f64, unit: &str, digits: usize) -> String {
    let text = quantity(value, unit, digits);
    if value > 0.0 {
        format!("+{text}")
    } else {
        text
    }
}

/// A number with `decimals` and its sign; `0.00` where nothing of it is left.
pub fn signed_decimals(value: f64, decimals: usize) -> String {
    let text = format!("{value:+.decimals$}");
    if !value.is_finite() || text.bytes().any(|byte| matches!(byte, b'1'..=b'9')) {
        text
    } else {
        text.trim_start_matches(['+', '-']).to_owned()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn markup_and_controls_lose_their_power() {
        assert_eq!(
            escape("<b a='1' c=\"2\">&\u{0}\u{202e}\n"),
            "&lt;b a=&#39;1&#39; c=&quot;2&quot;&gt;&amp;\u{fffd}\u{fffd} "
        );
        assert_eq!(escape_lines("a<\n\tb\u{7}"), "a&lt;\n    b\u{fffd}");
    }

    #[test]
    fn numbers_keep_their_units() {
        assert_eq!(
            keep_units("2 % of 300 ns, at 5 o'clock"),
            "2\u{a0}% of 300\u{a0}ns, at 5 o'clock"
        );
    }

    #[test]
    fn signs_are_written() {
        assert_eq!(signed(12_500.0, "Hz", 4), "+12.5 kHz");
        assert_eq!(signed(-12_500.0, "Hz", 4), "-12.5 kHz");
        assert_eq!(signed(0.0, "Hz", 4), "0 Hz");
        assert_eq!(signed_decimals(0.126, 2), "+0.13");
        assert_eq!(signed_decimals(-0.004, 2), "0.00");
        assert_eq!(signed_decimals(f64::NEG_INFINITY, 2), "-inf");
    }
}
