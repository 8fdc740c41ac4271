//! From a chart to a drawing, for a given width.

use super::axis::{Axis, usable};
use super::canvas::{Anchor, Canvas, Dash, Place, Weight};
use super::chart::{Chart, Curve, Forbidden, Panel};
use super::font;
use super::label::{self, Frame};
use super::legend;
use super::thin::{clip, runs, straighten, thin};
use crate::report::palette::Role;

/// Room at the sides of the drawing.
const PAD: f64 = 8.0;

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
    let (ticks, widest) = across_ticks(&across, room - left, size);
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

/// How many ticks a height has room for.
fn up_ticks(height: f64) -> usize {
    ((height / 28.0) as usize).clamp(3, 9)
}

/// The most ticks whose texts do not touch in `room` pixels, and the widest text.
fn across_ticks(across: &Axis, room: f64, size: f64) -> (Vec<super::axis::Tick>, f64) {
    let mut most = 10;
    loop {
        let ticks = across.ticks(most);
        let widest = ticks
            .iter()
            .map(|tick| font::width(&tick.text, size))
            .fold(0.0, f64::max);
        if most <= 2 || ticks.len() as f64 * (widest + 10.0) <= room {
            return (ticks, widest);
        }
        most -= 1;
    }
}

/// One panel's place on the drawing and its axes.
struct Plot<'a> {
    across: &'a Axis,
    up: &'a Axis,
    frame: Frame,
    /// Curves keep their extremes per this many pixels.
    column: f64,
    size: f64,
}

impl Plot<'_> {
    fn x(&self, value: f64) -> Option<f64> {
        let share = self.across.share(value)?;
        Some(self.frame.left + share * self.frame.width())
    }

    fn place(&self, point: (f64, f64)) -> Option<Place> {
        let share = self.up.share(point.1)?;
        Some((
            self.x(point.0)?,
            self.frame.bottom - share * self.frame.height(),
        ))
    }

    /// Shades, densities, grid and frame: what lies behind the curves.
    fn ground(
        &self,
        canvas: &mut Canvas,
        chart: &Chart,
        panel: &Panel,
        ticks: &[super::axis::Tick],
    ) {
        let frame = self.frame;
        for shade in &chart.shades {
            if let (Some(from), Some(to)) = (self.x(shade.from), self.x(shade.to)) {
                let from = from.clamp(frame.left, frame.right);
                let to = to.clamp(frame.left, frame.right);
                if to - from > 0.05 {
                    canvas.fill(
                        (from, frame.top),
                        (to, frame.bottom),
                        shade.role,
                        shade.opacity,
                    );
                }
            }
        }
        for backdrop in &panel.backdrops {
            self.backdrop(canvas, &backdrop.points);
        }
        let mut rule = |from: Place, to: Place| {
            canvas.line(vec![from, to], Role::Grid, 0.8, Dash::Solid);
        };
        for x in ticks.iter().filter_map(|tick| self.x(tick.value)) {
            rule((x, frame.top), (x, frame.bottom));
        }
        for tick in self.up.ticks(up_ticks(frame.height())) {
            let Some(share) = self.up.share(tick.value) else {
                continue;
            };
            let y = frame.bottom - share * frame.height();
            canvas.line(
                vec![(frame.left, y), (frame.right, y)],
                Role::Grid,
                0.8,
                Dash::Solid,
            );
            canvas.text(
                (frame.left - 6.0, y + self.size * 0.35),
                &font::elide(&tick.text, self.size, frame.left - PAD),
                Role::Muted,
                self.size,
                Anchor::End,
                Weight::Normal,
            );
        }
        for cell in &panel.cells {
            if let (Some(from), Some(to)) = (self.place(cell.from), self.place(cell.to)) {
                let inside = |at: Place| {
                    (
                        at.0.clamp(frame.left, frame.right),
                        at.1.clamp(frame.top, frame.bottom),
                    )
                };
                let strength = usable(cell.strength).unwrap_or(0.0).clamp(0.0, 1.0);
                canvas.fill(inside(from), inside(to), Role::First, strength);
            }
        }
        canvas.line(
            vec![
                (frame.left, frame.top),
                (frame.left, frame.bottom),
                (frame.right, frame.bottom),
            ],
            Role::Frame,
            1.0,
            Dash::Solid,
        );
    }

    /// A density: its peak reaches to two fifths of the height.
    fn backdrop(&self, canvas: &mut Canvas, points: &[(f64, f64)]) {
        let frame = self.frame;
        let weight = |point: &(f64, f64)| usable(point.1).unwrap_or(0.0).max(0.0);
        let most = points.iter().map(weight).fold(0.0, f64::max);
        if most <= 0.0 {
            return;
        }
        let places = points.iter().map(|point| {
            let height = frame.height() * 0.4 * weight(point) / most;
            Some((self.x(point.0)?, frame.bottom - height))
        });
        for run in runs(places) {
            let line = thin(&run, self.column);
            for part in clip(&line, (frame.left, frame.top), (frame.right, frame.bottom)) {
                self.fill_to(canvas, &part, frame.bottom, Role::Wash, 1.0);
            }
        }
    }

    /// Fills between a line and the height `y`.
    fn fill_to(&self, canvas: &mut Canvas, line: &[Place], y: f64, role: Role, opacity: f64) {
        if let (Some(first), Some(last)) = (line.first(), line.last()) {
            let mut outline = vec![(first.0, y)];
            outline.extend(straighten(line, 0.05));
            outline.push((last.0, y));
            canvas.area(outline, role, opacity);
        }
    }

    /// The curves, then the marked points over them.
    fn contents(&self, canvas: &mut Canvas, panel: &Panel) {
        let mut drawn = Vec::new();
        for curve in &panel.curves {
            self.curve(canvas, curve, &mut drawn);
        }
        let mut placed: Vec<Frame> = Vec::new();
        for mark in &panel.marks {
            let Some(at) = self.place(mark.at) else {
                continue;
            };
            if at.0 < self.frame.left - 0.5 || at.0 > self.frame.right + 0.5 {
                continue;
            }
            let at = (at.0, at.1.clamp(self.frame.top, self.frame.bottom));
            canvas.dot(at, 4.6, Role::Paper);
            canvas.dot(at, 3.4, mark.role);
            let lines = font::wrap(&mark.text, self.size, self.frame.width() * 0.45, 2);
            let widest = lines
                .iter()
                .map(|line| font::bold_width(line, self.size))
                .fold(0.0, f64::max);
            let line_height = self.size + 2.0;
            let label_size = (widest + 6.0, line_height * lines.len() as f64 + 4.0);
            if let Some(place) = label::place(at, label_size, &self.frame, &drawn, &placed) {
                let touch = (
                    at.0.clamp(place.left, place.right),
                    at.1.clamp(place.top, place.bottom),
                );
                canvas.line(vec![at, touch], mark.role, 0.9, Dash::Solid);
                canvas.fill(
                    (place.left, place.top),
                    (place.right, place.bottom),
                    Role::Paper,
                    0.9,
                );
                for (index, line) in lines.iter().enumerate() {
                    let baseline = place.top + line_height * (index + 1) as f64 - 1.0;
                    canvas.text(
                        ((place.left + place.right) / 2.0, baseline),
                        &line.replace('\u{a0}', " "),
                        mark.role,
                        self.size,
                        Anchor::Middle,
                        Weight::Bold,
                    );
                }
                placed.push(place);
            }
        }
    }

    fn curve(&self, canvas: &mut Canvas, curve: &Curve, drawn: &mut Vec<Place>) {
        let frame = self.frame;
        let places = curve.points.iter().map(|&point| self.place(point));
        for run in runs(places) {
            if let [only] = run[..] {
                if frame.holds(only) {
                    canvas.dot(only, curve.width, curve.role);
                    drawn.push(only);
                }
                continue;
            }
            let line = thin(&run, self.column);
            for part in clip(&line, (frame.left, frame.top), (frame.right, frame.bottom)) {
                if curve.forbidden == Forbidden::Above {
                    self.fill_to(canvas, &part, frame.top, curve.role, 0.08);
                }
                sample(&part, drawn);
                canvas.line(straighten(&part, 0.05), curve.role, curve.width, curve.dash);
            }
        }
    }
}

/// Adds places along `line`, at most 4 px apart.
fn sample(line: &[Place], places: &mut Vec<Place>) {
    for pair in line.windows(2) {
        let (from, to) = (pair[0], pair[1]);
        let steps = ((to.0 - from.0).hypot(to.1 - from.1) / 4.0).ceil().max(1.0);
        for step in 0..steps as usize {
            let share = step as f64 / steps;
            places.push((
                from.0 + (to.0 - from.0) * share,
                from.1 + (to.1 - from.1) * share,
            ));
        }
    }
    places.extend(line.last());
}
