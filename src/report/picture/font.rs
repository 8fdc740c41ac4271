//! Text widths, and the built-in font of the PNG pictures.
//!
//! A browser draws SVG text in a font of its own. Its glyphs are wider or narrower than the
//! built-in ones, so widths carry a reserve: [`RESERVE`] covers the widest common sans-serif faces.

use std::sync::OnceLock;

use ab_glyph::{Font, FontRef, PxScale, ScaleFont};
use plotters::style::FontStyle;

/// The name under which plotters knows the built-in font.
pub(crate) const FAMILY: &str = "quietedge";

/// Share by which a browser's font may be wider than the built-in one (measured against wide
/// sans-serif faces of this kind: about 1.17 on digits and lower case).
pub(crate) const RESERVE: f64 = 1.2;

/// How much wider bold letters are.
const BOLD: f64 = 1.12;

/// Height of the built-in font (ascent less descent) over its em.
const HEIGHT_PER_EM: f64 = 1.149;

static FONT: OnceLock<Option<FontRef<'static>>> = OnceLock::new();

/// Registers the built-in font once for the process.
fn font() -> Option<&'static FontRef<'static>> {
    FONT.get_or_init(|| {
        let bytes = epaint_default_fonts::UBUNTU_LIGHT;
        plotters::style::register_font(FAMILY, FontStyle::Normal, bytes).ok()?;
        FontRef::try_from_slice(bytes).ok()
    })
    .as_ref()
}

/// Makes sure that plotters can draw text.
pub(crate) fn ready() {
    font();
}

/// The size that plotters' bitmap text needs for letters of `em` pixels.
pub(crate) fn bitmap_size(em: f64) -> f64 {
    em * HEIGHT_PER_EM
}

/// The width to keep free for `text` at `em` pixels, in pixels, reserve included.
pub(crate) fn width(text: &str, em: f64) -> f64 {
    let Some(font) = font() else {
        return text.chars().count() as f64 * em * 0.7;
    };
    let scaled = font.as_scaled(PxScale::from(bitmap_size(em) as f32));
    let advance: f32 = text
        .chars()
        .map(|c| scaled.h_advance(scaled.glyph_id(c)))
        .sum();
    f64::from(advance) * RESERVE
}

/// The width to keep free for `text` in bold.
pub(crate) fn bold_width(text: &str, em: f64) -> f64 {
    width(text, em) * BOLD
}

/// `text` shortened to `available` pixels, with an ellipsis where something is missing.
pub(crate) fn elide(text: &str, em: f64, available: f64) -> String {
    if width(text, em) <= available {
        return text.to_owned();
    }
    let mut kept = String::new();
    for c in text.chars() {
        kept.push(c);
        if width(&kept, em) + width("…", em) > available {
            kept.pop();
            break;
        }
    }
    format!("{}…", kept.trim_end())
}

/// `text` broken at spaces (not at no-break spaces) into at most `lines` lines of `available` pixels.
pub(crate) fn wrap(text: &str, em: f64, available: f64, lines: usize) -> Vec<String> {
    let mut wrapped: Vec<String> = Vec::new();
    let mut words = text.split(' ').filter(|word| !word.is_empty());
    while let Some(word) = words.next() {
        let joined = match wrapped.last() {
            Some(line) => format!("{line} {word}"),
            None => word.to_owned(),
        };
        if wrapped.is_empty() {
            wrapped.push(joined);
        } else if width(&joined, em) <= available {
            if let Some(line) = wrapped.last_mut() {
                *line = joined;
            }
        } else if wrapped.len() < lines {
            wrapped.push(word.to_owned());
        } else {
            let rest = words.collect::<Vec<_>>().join(" ");
            if let Some(line) = wrapped.last_mut() {
                *line = format!("{joined} {rest}");
            }
            break;
        }
    }
    wrapped
        .iter()
        .map(|line| elide(line, em, available))
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_built_in_font_loads_and_has_the_signs_we_use() {
        let font = font().expect("the font is compiled in");
        for c in "0123456789+-.,%/()°µΩ²…".chars() {
            assert_ne!(font.glyph_id(c).0, 0, "{c}");
        }
    }

    #[test]
    fn text_is_broken_and_shortened_to_the_room() {
        let text = "power outside the channel in a hundred hertz, both sides";
        let lines = wrap(text, 12.0, 120.0, 9);
        assert!(lines.len() > 2);
        assert_eq!(lines.join(" "), text);
        assert!(lines.iter().all(|line| width(line, 12.0) <= 120.0));
        let short = wrap(text, 12.0, 120.0, 2);
        assert_eq!(short.len(), 2);
        assert!(short[1].ends_with('…') && width(&short[1], 12.0) <= 120.0);
        assert!(elide(&"W".repeat(500), 12.0, 50.0).chars().count() < 9);
    }
}
