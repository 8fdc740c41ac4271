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

/// A quantity with its sign always written: `+12.5 kHz`.
pub fn signed(value: f64, unit: &str, digits: usize) -> String {
    let text = units::show(value, unit, digits);
    if value > 0.0 {
        format!("+{text}")
    } else {
        text
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
    fn signs_are_written() {
        assert_eq!(signed(12_500.0, "Hz", 4), "+12.5 kHz");
        assert_eq!(signed(-12_500.0, "Hz", 4), "-12.5 kHz");
        assert_eq!(signed(0.0, "Hz", 4), "0 Hz");
    }
}
