//! From a chart to a drawing, for a given width.

use super::axis::{Axis, Tick};
use super::canvas::{Anchor, Canvas, Dash, Weight};
use super::chart::{Chart, Panel};
use super::font;
use super::label::Frame;
use super::legend;
use super::plot::{PAD, Plot, up_ticks};
use crate::report::palette::Role;

/// The size a drawing is made for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Format {
    /// Screens and A4 paper: 720 px.
    Wide,
    /// A phone held upright: 336 px.
    Narrow,
}

impl Format {
    fn width(self) -> f64 {
        match self {
            Self::Wide => 720.0,
            Self::Narrow => 336.0,
        }
    }

    /// Size of ordinary text, pixels per em.
    pub(crate) fn text_size(self) -> f64 {
        match self {
            Self::Wide => 13.0,
            Self::Narrow => 12.5,
        }
    }

    fn height_of(self, panel: &Panel) -> f64 {
        match self {
            Self::Wide => panel.height,
            Self::Narrow => (panel.height * 0.85).max(90.0),
        }
    }
}

/// Draws `chart`.
pub(crate) fn draw(chart: &Chart, format: Format) -> Canvas {
    let size = format.text_size();
    let mut canvas = Canvas {
        width: format.width(),
        ..Canvas::default()
    };
    let room = canvas.width - 2.0 * PAD;

    let mut y = 4.0;
    for line in font::wrap(&chart.title, (size + 1.5) * 1.1, room, 3) {
        y += size + 6.0;
        canvas.text(
            (PAD, y),
            &line,
            Role::Ink,
            size + 1.5,
            Anchor::Start,
            Weight::Bold,
        );
    }
    y += 8.0;
    y = legend::draw(&mut canvas, &legend::entries(chart), (PAD, y), room, size);

    let across = across_axis(chart);
    let ups: Vec<Axis> = chart
        .panels
        .iter()
        .map(|panel| up_axis(panel, &across))
        .collect();
    let left = PAD
        + 8.0
        + chart
            .panels
            .iter()
            .zip(&ups)
            .flat_map(|(panel, up)| up.ticks(up_ticks(format.height_of(panel))))
            .map(|tick| font::width(&tick.text, size))
            .fold(0.0, f64::max)
            .min(canvas.width / 3.0);
    let (ticks, widest) = across_ticks(&across, room - left - 32.0, size);
    let right = canvas.width - PAD - (widest / 2.0 - 4.0).clamp(4.0, 40.0);
    let curves: usize = chart.panels.iter().map(|panel| panel.curves.len()).sum();
    let column = (curves as f64 / 4.0).max(1.0);

    let mut bottom = y;
    for (panel, up) in chart.panels.iter().zip(&ups) {
        y += size + 5.0;
        canvas.text(
            (PAD, y),
            &font::elide(&up.title, size, room),
            Role::Muted,
            size,
            Anchor::Start,
            Weight::Normal,
        );
        y += 12.0;
        bottom = y + format.height_of(panel);
        let frame = Frame {
            left,
            top: y,
            right,
            bottom,
        };
        let plot = Plot {
            across: &across,
            up,
            frame,
            column,
            size,
        };
        plot.ground(&mut canvas, chart, panel, &ticks);
        plot.contents(&mut canvas, panel);
        y = bottom + 6.0;
    }

    y = bottom + size + 5.0;
    for tick in &ticks {
        if let Some(share) = across.share(tick.value) {
            let x = left + share * (right - left);
            canvas.line(
                vec![(x, bottom), (x, bottom + 4.0)],
                Role::Frame,
                1.0,
                Dash::Solid,
            );
            canvas.text(
                (x, y + 1.0),
                &tick.text,
                Role::Muted,
                size,
                Anchor::Middle,
                Weight::Normal,
            );
        }
    }
    y += size + 5.0;
    canvas.text(
        (right, y),
        &font::elide(&across.title, size, room),
        Role::Muted,
        size,
        Anchor::End,
        Weight::Normal,
    );
    canvas.height = (y + 8.0).ceil();
    canvas
}

fn across_axis(chart: &Chart) -> Axis {
    let points = chart.panels.iter().flat_map(|panel| {
        let curves = panel.curves.iter().flat_map(|curve| curve.points.iter());
        let cells = panel.cells.iter().flat_map(|cell| [&cell.from, &cell.to]);
        curves.chain(cells).map(|point| point.0)
    });
    Axis::fit(&chart.across, points, 0.0)
}

fn up_axis(panel: &Panel, across: &Axis) -> Axis {
    let inside = |point: &&(f64, f64)| {
        across
            .share(point.0)
            .is_some_and(|share| (-1e-9..=1.0 + 1e-9).contains(&share))
    };
    let curves = panel.curves.iter().flat_map(|curve| curve.points.iter());
    let cells = panel.cells.iter().flat_map(|cell| [&cell.from, &cell.to]);
    let marks = panel.marks.iter().map(|mark| &mark.at);
    let values = curves
        .chain(cells)
        .chain(marks)
        .filter(inside)
        .map(|point| point.1);
    Axis::fit(&panel.up, values, 0.06)
}

/// The most ticks whose texts do not touch in `room` pixels, and the widest text.
fn across_ticks(across: &Axis, room: f64, size: f64) -> (Vec<Tick>, f64) {
    let share = |tick: &Tick| across.share(tick.value).unwrap_or(0.0);
    let mut most = 10;
    loop {
        let mut ticks = across.ticks(most);
        let widest = ticks
            .iter()
            .map(|tick| font::width(&tick.text, size))
            .fold(0.0, f64::max);
        let fits = ticks
            .windows(2)
            .all(|pair| (share(&pair[1]) - share(&pair[0])) * room >= widest + 8.0);
        if fits || most <= 2 {
            if !fits {
                ticks.truncate(1);
            }
            return (ticks, widest);
        }
        most -= 1;
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::picture::axis::AxisSpec;
    use crate::report::picture::canvas::Shape;
    use crate::report::picture::chart::{Curve, Mark};
    use proptest::prelude::*;

    /// The boxes of all texts, as wide as the widest common font draws them.
    fn boxes(canvas: &Canvas) -> Vec<(String, Frame)> {
        let text_box = |shape: &Shape| {
            let Shape::Text {
                at,
                text,
                size,
                anchor,
                weight,
                ..
            } = shape
            else {
                return None;
            };
            // The measured extremes of a browser's font over the built-in one; see `font`.
            let width = font::width(text, *size) / font::RESERVE
                * match weight {
                    Weight::Normal => 1.18,
                    Weight::Bold => 1.31,
                };
            let left = match anchor {
                Anchor::Start => at.0,
                Anchor::Middle => at.0 - width / 2.0,
                Anchor::End => at.0 - width,
            };
            let frame = Frame {
                left,
                top: at.1 - 0.76 * size,
                right: left + width,
                bottom: at.1 + 0.2 * size,
            };
            Some((text.clone(), frame))
        };
        canvas.shapes.iter().filter_map(text_box).collect()
    }

    fn chart(title: &str, names: &[String], lines: &[Vec<(f64, f64)>], marks: usize) -> Chart {
        let mut panels = Vec::new();
        for (index, line) in lines.iter().enumerate() {
            let mut panel = Panel::new(AxisSpec::engineering("output amplitude", "V"), 110.0);
            for name in names {
                panel
                    .curves
                    .push(Curve::numbered(index, name, line.clone()));
            }
            panel.marks.extend(line.iter().take(marks).map(|&at| Mark {
                at,
                text: "margin\u{a0}-3.2\u{a0}dB at\u{a0}+12.5\u{a0}kHz".to_owned(),
                role: Role::Limit,
            }));
            panels.push(panel);
        }
        Chart {
            title: title.to_owned(),
            across: AxisSpec::engineering("offset from the carrier", "Hz"),
            shades: Vec::new(),
            panels,
        }
    }

    proptest! {
        #[test]
        fn texts_never_touch_and_stay_on_the_drawing(
            title in "[a-zA-Z ,]{0,120}",
            names in prop::collection::vec("[a-z ]{0,60}", 0..6),
            lines in prop::collection::vec(
                prop::collection::vec((-1.0..1.0f64, -1.0..1.0f64), 0..8), 1..4),
            exponents in (-12i32..12, -12i32..12),
            shift in prop_oneof![Just(0.0), -1e3..1e3f64],
            marks in 0usize..4,
        ) {
            let (across, up) = (10f64.powi(exponents.0), 10f64.powi(exponents.1));
            let lines: Vec<Vec<_>> = lines
                .iter()
                .map(|line| line.iter().map(|p| ((p.0 + shift) * across, (p.1 + shift) * up)).collect())
                .collect();
            for format in [Format::Wide, Format::Narrow] {
                let canvas = draw(&chart(&title, &names, &lines, marks), format);
                let boxes = boxes(&canvas);
                for (index, (text, frame)) in boxes.iter().enumerate() {
                    prop_assert!(
                        frame.left >= 0.0 && frame.right <= canvas.width && frame.bottom <= canvas.height,
                        "{text:?} leaves the drawing in {format:?}: {frame:?}"
                    );
                    for (other, other_frame) in &boxes[..index] {
                        prop_assert!(
                            !frame.meets(other_frame),
                            "{text:?} touches {other:?} in {format:?}: {frame:?} {other_frame:?}"
                        );
                    }
                }
            }
        }
    }
}
