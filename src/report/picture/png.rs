//! A drawing as a PNG picture, always on light paper: for documents that take no SVG.
//!
//! Drawn at twice the wanted resolution and averaged down, which smooths edges.

use plotters::prelude::*;
use plotters::style::text_anchor::{HPos, Pos, VPos};

use super::canvas::{Anchor, Canvas, Dash, Place, Shape, Weight};
use super::font;
use crate::report::palette::Role;

/// Pixels of the picture per pixel of the drawing.
const DENSITY: usize = 2;
/// Drawn pixels per pixel of the picture, per axis.
const OVERSAMPLING: usize = 2;
const UNITS: f64 = (DENSITY * OVERSAMPLING) as f64;

/// Draws `canvas` and encodes it.
pub(crate) fn draw(canvas: &Canvas) -> Result<Result<Vec<u8>, png::EncodingError>, String> {
    font::ready();
    let width = (canvas.width.ceil().max(1.0) as usize) * DENSITY;
    let height = (canvas.height.ceil().max(1.0) as usize) * DENSITY;
    let drawn_size = (width * OVERSAMPLING, height * OVERSAMPLING);
    let mut drawn = vec![0; drawn_size.0 * drawn_size.1 * 3];
    {
        let root =
            BitMapBackend::with_buffer(&mut drawn, (drawn_size.0 as u32, drawn_size.1 as u32))
                .into_drawing_area();
        root.fill(&colour(Role::Paper))
            .map_err(|error| error.to_string())?;
        for shape in &canvas.shapes {
            draw_shape(&root, shape).map_err(|error| error.to_string())?;
        }
        root.present().map_err(|error| error.to_string())?;
    }
    Ok(encode(&average(&drawn, drawn_size.0), width, height))
}

fn colour(role: Role) -> RGBColor {
    let [r, g, b] = role.light();
    RGBColor(r, g, b)
}

fn units(pixels: f64) -> i32 {
    (pixels.clamp(-1e5, 1e5) * UNITS).round() as i32
}

fn draw_shape<B: DrawingBackend>(
    root: &DrawingArea<B, plotters::coord::Shift>,
    shape: &Shape,
) -> Result<(), DrawingAreaErrorKind<B::ErrorType>> {
    let place = |at: &Place| (units(at.0), units(at.1));
    match shape {
        Shape::Line {
            points,
            role,
            width,
            dash,
        } => {
            let style = colour(*role).filled();
            for (from, to) in strokes(points, dash.pattern()) {
                root.draw(&Polygon::new(bar(from, to, *width), style))?;
            }
            // Round joints close the wedges between the bars.
            if *dash == Dash::Solid && *width > 0.8 && points.len() > 2 {
                for joint in &points[1..points.len() - 1] {
                    root.draw(&Circle::new(
                        place(joint),
                        units(*width / 2.0).max(1) - 1,
                        style,
                    ))?;
                }
            }
            Ok(())
        }
        Shape::Area {
            points,
            role,
            opacity,
        } => root.draw(&Polygon::new(
            points.iter().map(place).collect::<Vec<_>>(),
            colour(*role).mix(*opacity).filled(),
        )),
        Shape::Dot { at, radius, role } => root.draw(&Circle::new(
            place(at),
            units(*radius),
            colour(*role).filled(),
        )),
        Shape::Text {
            at,
            text,
            role,
            size,
            anchor,
            weight,
        } => {
            let size = font::bitmap_size(*size) * UNITS;
            let horizontal = match anchor {
                Anchor::Start => HPos::Left,
                Anchor::Middle => HPos::Center,
                Anchor::End => HPos::Right,
            };
            let ink = colour(*role);
            let style = (font::FAMILY, size)
                .into_text_style(root)
                .color(&ink)
                .pos(Pos::new(horizontal, VPos::Top));
            // plotters puts the baseline half the size below the top.
            let (x, y) = place(at);
            let y = y - (size / 2.0) as i32;
            // The built-in font has one weight: bold is drawn with a fine offset.
            let offsets: &[i32] = match weight {
                Weight::Normal => &[0, 1],
                Weight::Bold => &[0, 1, 2],
            };
            for offset in offsets {
                root.draw(&Text::new(text.clone(), (x + offset, y), style.clone()))?;
            }
            Ok(())
        }
    }
}

/// The outline of a straight stroke of `width` pixels.
fn bar(from: Place, to: Place, width: f64) -> Vec<(i32, i32)> {
    let (dx, dy) = (to.0 - from.0, to.1 - from.1);
    let length = dx.hypot(dy).max(1e-9);
    let (nx, ny) = (-dy / length * width / 2.0, dx / length * width / 2.0);
    [
        (from.0 + nx, from.1 + ny),
        (to.0 + nx, to.1 + ny),
        (to.0 - nx, to.1 - ny),
        (from.0 - nx, from.1 - ny),
    ]
    .iter()
    .map(|at| (units(at.0), units(at.1)))
    .collect()
}

/// The visible straight pieces of a line broken by `pattern` (stroke, gap, stroke, ...).
fn strokes(points: &[Place], pattern: &[f64]) -> Vec<(Place, Place)> {
    if pattern.is_empty() {
        return points.windows(2).map(|pair| (pair[0], pair[1])).collect();
    }
    let mut pieces = Vec::new();
    let (mut index, mut left) = (0, pattern[0]);
    for pair in points.windows(2) {
        let (from, to) = (pair[0], pair[1]);
        let length = (to.0 - from.0).hypot(to.1 - from.1);
        let at = |distance: f64| {
            let share = distance / length;
            (
                from.0 + (to.0 - from.0) * share,
                from.1 + (to.1 - from.1) * share,
            )
        };
        let mut done = 0.0;
        while done < length {
            let step = left.min(length - done);
            if index % 2 == 0 {
                pieces.push((at(done), at(done + step)));
            }
            done += step;
            left -= step;
            if left <= 1e-9 {
                index = (index + 1) % pattern.len();
                left = pattern[index];
            }
        }
    }
    pieces
}

/// The mean over squares of `OVERSAMPLING` by `OVERSAMPLING` pixels.
fn average(drawn: &[u8], drawn_width: usize) -> Vec<u8> {
    let stride = drawn_width * 3;
    let mut out = Vec::with_capacity(drawn.len() / (OVERSAMPLING * OVERSAMPLING));
    for rows in drawn.chunks_exact(stride * OVERSAMPLING) {
        for column in 0..drawn_width / OVERSAMPLING {
            for channel in 0..3 {
                let mut sum = 0u32;
                for row in 0..OVERSAMPLING {
                    for step in 0..OVERSAMPLING {
                        let at = row * stride + (column * OVERSAMPLING + step) * 3 + channel;
                        sum += u32::from(rows[at]);
                    }
                }
                let count = (OVERSAMPLING * OVERSAMPLING) as u32;
                out.push(((sum + count / 2) / count) as u8);
            }
        }
    }
    out
}

fn encode(rgb: &[u8], width: usize, height: usize) -> Result<Vec<u8>, png::EncodingError> {
    let mut bytes = Vec::new();
    let mut encoder = png::Encoder::new(&mut bytes, width as u32, height as u32);
    encoder.set_color(png::ColorType::Rgb);
    encoder.set_depth(png::BitDepth::Eight);
    encoder.set_filter(png::FilterType::Up);
    encoder.set_compression(png::Compression::Best);
    let mut writer = encoder.write_header()?;
    writer.write_image_data(rgb)?;
    writer.finish()?;
    Ok(bytes)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_broken_line_is_as_long_as_its_strokes() {
        let line = [(0.0, 0.0), (10.0, 0.0), (10.0, 16.0)];
        let pieces = strokes(&line, &[9.0, 4.0]);
        let length: f64 = pieces
            .iter()
            .map(|(a, b)| (b.0 - a.0).hypot(b.1 - a.1))
            .sum();
        // 26 px of line hold two whole strokes and two whole gaps.
        assert!((length - 18.0).abs() < 1e-9, "{length}");
        // A stroke that turns a corner is two pieces.
        assert_eq!(pieces.len(), 2);
    }

    #[test]
    fn averaging_takes_the_mean_of_each_square() {
        let drawn: Vec<u8> = [[0u8; 3], [100; 3], [200; 3], [100; 3]].concat();
        assert_eq!(average(&drawn, 2), vec![100; 3]);
    }
}
