//! The legend: one entry per name, in rows above the panels.

use super::canvas::{Anchor, Canvas, Dash, Place, Weight};
use super::chart::{Chart, Curve};
use super::font;
use crate::report::palette::Role;

const SWATCH: f64 = 22.0;

/// What stands beside a name.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) enum Swatch {
    Line { role: Role, width: f64, dash: Dash },
    Fill { role: Role, opacity: f64 },
}

/// The entries of `chart`, without repeats.
pub(crate) fn entries(chart: &Chart) -> Vec<(String, Swatch)> {
    let mut entries: Vec<(String, Swatch)> = Vec::new();
    let mut add = |name: &str, swatch: Swatch| {
        if !name.is_empty() && entries.iter().all(|(known, _)| known != name) {
            entries.push((name.to_owned(), swatch));
        }
    };
    for panel in &chart.panels {
        let mut curves: Vec<&Curve> = panel.curves.iter().collect();
        curves.sort_by_key(|curve| curve.legend_order);
        for curve in curves {
            add(
                &curve.name,
                Swatch::Line {
                    role: curve.role,
                    width: curve.width,
                    dash: curve.dash,
                },
            );
        }
        if !panel.cells.is_empty() {
            let swatch = Swatch::Fill {
                role: Role::First,
                opacity: 0.5,
            };
            add(&panel.cells_name, swatch);
        }
        for backdrop in &panel.backdrops {
            let swatch = Swatch::Fill {
                role: Role::Wash,
                opacity: 1.0,
            };
            add(&backdrop.name, swatch);
        }
    }
    for shade in &chart.shades {
        let swatch = Swatch::Fill {
            role: shade.role,
            opacity: shade.opacity,
        };
        add(&shade.name, swatch);
    }
    entries
}

/// Draws `entries` below `at`, at most `room` wide; the height where the rest may start.
pub(crate) fn draw(
    canvas: &mut Canvas,
    entries: &[(String, Swatch)],
    at: Place,
    room: f64,
    size: f64,
) -> f64 {
    let (mut x, mut y) = (at.0, at.1);
    if entries.is_empty() {
        return y;
    }
    y += size;
    for (name, swatch) in entries {
        let name = font::elide(name, size, room - SWATCH - 6.0);
        let width = SWATCH + 6.0 + font::width(&name, size);
        if x > at.0 && x + width > at.0 + room {
            x = at.0;
            y += size + 5.0;
        }
        let middle = y - size * 0.35;
        match *swatch {
            Swatch::Line { role, width, dash } => {
                canvas.line(vec![(x, middle), (x + SWATCH, middle)], role, width, dash)
            }
            Swatch::Fill { role, opacity } => {
                let (from, to) = ((x, middle - 5.0), (x + SWATCH, middle + 5.0));
                canvas.fill(from, to, role, opacity);
                let outline = vec![from, (to.0, from.1), to, (from.0, to.1), from];
                canvas.line(outline, Role::Frame, 0.7, Dash::Solid);
            }
        }
        canvas.text(
            (x + SWATCH + 6.0, y),
            &name,
            Role::Ink,
            size,
            Anchor::Start,
            Weight::Normal,
        );
        x += width + 16.0;
    }
    y + 6.0
}
