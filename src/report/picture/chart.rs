//! A chart as plain data: panels over one shared axis. [`super::layout`] turns it into a drawing.

use super::axis::AxisSpec;
use super::canvas::Dash;
use crate::report::palette::Role;

/// Points of a curve, (across, up), in SI or the axis's plain unit.
pub(crate) type Points = Vec<(f64, f64)>;

/// Panels that share the axis across.
#[derive(Debug, Clone)]
pub(crate) struct Chart {
    pub(crate) title: String,
    pub(crate) across: AxisSpec,
    pub(crate) shades: Vec<Shade>,
    pub(crate) panels: Vec<Panel>,
}

/// A stretch of the shared axis that is marked in every panel.
#[derive(Debug, Clone)]
pub(crate) struct Shade {
    pub(crate) name: String,
    pub(crate) from: f64,
    pub(crate) to: f64,
    pub(crate) role: Role,
    pub(crate) opacity: f64,
}

/// One panel.
#[derive(Debug, Clone)]
pub(crate) struct Panel {
    pub(crate) up: AxisSpec,
    pub(crate) curves: Vec<Curve>,
    pub(crate) backdrops: Vec<Backdrop>,
    pub(crate) cells: Vec<Cell>,
    /// As the legend says the cells.
    pub(crate) cells_name: String,
    pub(crate) marks: Vec<Mark>,
    /// Height in a wide picture, in pixels.
    pub(crate) height: f64,
}

impl Panel {
    /// An empty panel of `height` pixels.
    pub(crate) fn new(up: AxisSpec, height: f64) -> Self {
        Self {
            up,
            curves: Vec::new(),
            backdrops: Vec::new(),
            cells: Vec::new(),
            cells_name: String::new(),
            marks: Vec::new(),
            height,
        }
    }
}

/// Which side of a curve is forbidden.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Forbidden {
    Nothing,
    Above,
}

/// A curve.
#[derive(Debug, Clone)]
pub(crate) struct Curve {
    /// As the legend says it; curves of the same name share an entry.
    pub(crate) name: String,
    pub(crate) points: Points,
    pub(crate) role: Role,
    pub(crate) width: f64,
    pub(crate) dash: Dash,
    pub(crate) forbidden: Forbidden,
    /// Entries of the legend stand in rising order of this.
    pub(crate) legend_order: usize,
}

impl Curve {
    /// Curve number `index` in the usual order of colours, widths and dashes.
    pub(crate) fn numbered(index: usize, name: &str, points: Points) -> Self {
        let (width, dash) = match index % 4 {
            0 => (1.7, Dash::Solid),
            1 => (1.3, Dash::Long),
            2 => (1.5, Dash::Short),
            _ => (1.5, Dash::Dots),
        };
        Self {
            name: name.to_owned(),
            points,
            role: Role::curve(index),
            width,
            dash,
            forbidden: Forbidden::Nothing,
            legend_order: index,
        }
    }

    /// A limit: a strong line, with the ground above it tinted.
    pub(crate) fn limit(name: &str, points: Points) -> Self {
        Self {
            name: name.to_owned(),
            points,
            role: Role::Limit,
            width: 2.2,
            dash: Dash::Solid,
            forbidden: Forbidden::Above,
            legend_order: usize::MAX,
        }
    }
}

/// A distribution along the shared axis, drawn behind the curves; only its shape counts.
#[derive(Debug, Clone)]
pub(crate) struct Backdrop {
    pub(crate) name: String,
    /// (across, weight), weights at or above zero.
    pub(crate) points: Points,
}

/// A shaded cell of a two-dimensional density.
#[derive(Debug, Clone)]
pub(crate) struct Cell {
    pub(crate) from: (f64, f64),
    pub(crate) to: (f64, f64),
    /// 0 to 1.
    pub(crate) strength: f64,
}

/// A point with a label.
#[derive(Debug, Clone)]
pub(crate) struct Mark {
    pub(crate) at: (f64, f64),
    pub(crate) text: String,
    pub(crate) role: Role,
}
