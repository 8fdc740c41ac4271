//! A drawing as SVG text whose colours follow the surroundings.
//!
//! plotters writes fixed colours. Each role and dash is drawn in a colour of its own that nothing
//! else uses, and that colour is then replaced by a class, whose colour is a CSS variable: one picture
//! serves light, dark and print.

use std::fmt::Write as _;

use plotters::prelude::*;
use plotters::style::text_anchor::{HPos, Pos, VPos};

use super::canvas::{Anchor, Canvas, Dash, Shape, Weight};
use super::font;
use crate::report::palette::{self, Role};
use crate::report::text::escape;

/// Drawing units per pixel: plotters rounds to whole units.
const UNITS: f64 = 10.0;

/// plotters writes its SVG font size divided by this.
const PLOTTERS_FONT_FACTOR: f64 = 1.24;

/// The faces a browser may choose from: its own.
pub(crate) const FONT_STACK: &str = "system-ui,sans-serif";

/// The colour that stands for `role` and `dash` until it is replaced.
fn stand_in(role: Role, dash: Dash) -> RGBColor {
    RGBColor(1, 2 + dash as u8, role.code())
}

fn units(pixels: f64) -> i32 {
    (pixels.clamp(-1e5, 1e5) * UNITS).round() as i32
}

/// The rules that give the classes of every picture their colours; for the page, or inside a lone file.
pub(crate) fn rules() -> String {
    let mut css = format!(
        ".qe text{{font-family:{FONT_STACK};font-variant-numeric:tabular-nums}}\
         .qe polyline{{fill:none;stroke-linejoin:round;stroke-linecap:butt}}"
    );
    for role in Role::ALL {
        let (code, name) = (role.code(), role.name());
        let _ = write!(
            css,
            ".qe .f{code}{{fill:var(--{name})}}.qe .s{code}{{stroke:var(--{name})}}"
        );
    }
    for dash in Dash::ALL {
        let pattern: Vec<String> = dash
            .pattern()
            .iter()
            .map(|pixels| units(*pixels).to_string())
            .collect();
        if !pattern.is_empty() {
            let _ = write!(
                css,
                ".qe .d{}{{stroke-dasharray:{}}}",
                dash as u8,
                pattern.join(" ")
            );
        }
    }
    css
}

/// Draws `canvas`; `name` is what a screen reader says. The picture expects [`rules`] and the colour
/// variables around it.
pub(crate) fn inline(canvas: &Canvas, name: &str, class: &str) -> Result<String, String> {
    let mut drawn = String::new();
    let size = (
        units(canvas.width).max(1) as u32,
        units(canvas.height).max(1) as u32,
    );
    {
        let root = SVGBackend::with_string(&mut drawn, size).into_drawing_area();
        for shape in &canvas.shapes {
            draw(&root, shape).map_err(|error| error.to_string())?;
        }
        root.present().map_err(|error| error.to_string())?;
    }
    let body = drawn
        .split_once(">\n")
        .map(|(_, body)| body)
        .unwrap_or_default();
    Ok(format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" class=\"qe {class}\" viewBox=\"0 0 {} {}\" role=\"img\" aria-label=\"{}\">\n{}",
        size.0,
        size.1,
        escape(name),
        classes(body)
    ))
}

/// As [`inline`], complete for a file of its own: size, colours for light and dark, and a background.
pub(crate) fn standalone(canvas: &Canvas, name: &str) -> Result<String, String> {
    let inline = inline(canvas, name, "lone")?;
    let style = format!(
        "<style>svg{{{}}}@media (prefers-color-scheme:dark){{svg{{{}}}}}@media print{{svg{{{}}}}}{}</style>\n",
        palette::declarations(Role::light),
        palette::declarations(Role::dark),
        palette::declarations(Role::light),
        rules(),
    );
    let size = format!(
        " width=\"{}\" height=\"{}\" role=",
        canvas.width.round(),
        canvas.height.round()
    );
    let background = format!(
        "<rect width=\"100%\" height=\"100%\" class=\"f{}\"/>\n",
        Role::Paper.code()
    );
    let (head, body) = inline.split_once(">\n").unwrap_or((&inline, ""));
    Ok(format!(
        "{}>\n{style}{background}{body}",
        head.replacen(" role=", &size, 1)
    ))
}

fn draw<B: DrawingBackend>(
    root: &DrawingArea<B, plotters::coord::Shift>,
    shape: &Shape,
) -> Result<(), DrawingAreaErrorKind<B::ErrorType>> {
    let place = |at: &(f64, f64)| (units(at.0), units(at.1));
    match shape {
        Shape::Line {
            points,
            role,
            width,
            dash,
        } => root.draw(&PathElement::new(
            points.iter().map(place).collect::<Vec<_>>(),
            stand_in(*role, *dash).stroke_width(units(*width).max(1) as u32),
        )),
        Shape::Area {
            points,
            role,
            opacity,
        } => root.draw(&Polygon::new(
            points.iter().map(place).collect::<Vec<_>>(),
            stand_in(*role, Dash::Solid).mix(*opacity).filled(),
        )),
        Shape::Dot { at, radius, role } => root.draw(&Circle::new(
            place(at),
            units(*radius),
            stand_in(*role, Dash::Solid).filled(),
        )),
        Shape::Text {
            at,
            text,
            role,
            size,
            anchor,
            weight,
        } => {
            let family = (
                font::FAMILY,
                size * UNITS * PLOTTERS_FONT_FACTOR,
                match weight {
                    Weight::Normal => FontStyle::Normal,
                    Weight::Bold => FontStyle::Bold,
                },
            );
            let horizontal = match anchor {
                Anchor::Start => HPos::Left,
                Anchor::Middle => HPos::Center,
                Anchor::End => HPos::Right,
            };
            let ink = stand_in(*role, Dash::Solid);
            let style = family
                .into_text_style(root)
                .color(&ink)
                .pos(Pos::new(horizontal, VPos::Top));
            root.draw(&Text::new(text.clone(), place(at), style))
        }
    }
}

/// Replaces the stand-in colours by classes and drops what every shape repeats. Text content cannot
/// match: its quotes are escaped.
fn classes(body: &str) -> String {
    let mut out = body.to_owned();
    for (given, wanted) in [
        (" opacity=\"1\"", ""),
        (" dy=\"0.76em\"", ""),
        (" text-anchor=\"start\"", ""),
        (" fill=\"none\"", ""),
        (" stroke=\"none\"", ""),
        (" font-family=\"quietedge\"", ""),
        (" \"/>", "\"/>"),
        ("\n</text>", "</text>"),
    ] {
        out = out.replace(given, wanted);
    }
    for role in Role::ALL {
        for dash in Dash::ALL {
            let RGBColor(r, g, b) = stand_in(role, dash);
            let colour = format!("#{r:02X}{g:02X}{b:02X}");
            if !out.contains(&colour) {
                continue;
            }
            let code = role.code();
            let stroke = match dash {
                Dash::Solid => format!("class=\"s{code}\""),
                dash => format!("class=\"s{code} d{}\"", dash as u8),
            };
            out = out
                .replace(&format!("stroke=\"{colour}\""), &stroke)
                .replace(
                    &format!("fill=\"{colour}\" stroke-width=\"1\""),
                    &format!("class=\"f{code}\""),
                )
                .replace(&format!("fill=\"{colour}\""), &format!("class=\"f{code}\""));
        }
    }
    // The opening of a text is followed by a line break that would show as a space.
    out.replace("\">\n", "\">")
}
