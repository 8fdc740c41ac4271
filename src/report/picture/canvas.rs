//! A drawing as a list of shapes in pixels, origin at the top left; drawn later as SVG or PNG.

use crate::report::palette::Role;
use crate::report::text::clean;

/// A place in pixels.
pub(crate) type Place = (f64, f64);

/// How a line is broken.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Dash {
    /// Unbroken.
    Solid,
    /// Long dashes.
    Long,
    /// Short dashes.
    Short,
    /// Dots.
    Dots,
}

impl Dash {
    /// All kinds, in the order of their codes.
    pub(crate) const ALL: [Self; 4] = [Self::Solid, Self::Long, Self::Short, Self::Dots];

    /// Lengths of stroke and gap in pixels; empty for an unbroken line.
    pub(crate) fn pattern(self) -> &'static [f64] {
        match self {
            Self::Solid => &[],
            Self::Long => &[9.0, 4.0],
            Self::Short => &[4.0, 3.0],
            Self::Dots => &[1.5, 3.0],
        }
    }
}

/// Which part of a text stands at its place.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Anchor {
    Start,
    Middle,
    End,
}

/// Weight of a text.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Weight {
    Normal,
    Bold,
}

/// One shape.
#[derive(Debug, Clone)]
pub(crate) enum Shape {
    Line {
        points: Vec<Place>,
        role: Role,
        width: f64,
        dash: Dash,
    },
    Area {
        points: Vec<Place>,
        role: Role,
        opacity: f64,
    },
    Dot {
        at: Place,
        radius: f64,
        role: Role,
    },
    /// `at` is on the baseline.
    Text {
        at: Place,
        text: String,
        role: Role,
        size: f64,
        anchor: Anchor,
        weight: Weight,
    },
}

/// A drawing under construction.
#[derive(Debug, Clone, Default)]
pub(crate) struct Canvas {
    pub(crate) width: f64,
    pub(crate) height: f64,
    pub(crate) shapes: Vec<Shape>,
}

impl Canvas {
    /// A line of at least two finite points; anything else draws nothing.
    pub(crate) fn line(&mut self, points: Vec<Place>, role: Role, width: f64, dash: Dash) {
        if points.len() > 1 && points.iter().all(finite) {
            self.shapes.push(Shape::Line {
                points,
                role,
                width,
                dash,
            });
        }
    }

    /// A filled outline.
    pub(crate) fn area(&mut self, points: Vec<Place>, role: Role, opacity: f64) {
        if points.len() > 2 && points.iter().all(finite) {
            self.shapes.push(Shape::Area {
                points,
                role,
                opacity,
            });
        }
    }

    /// A filled rectangle between two corners.
    pub(crate) fn fill(&mut self, a: Place, b: Place, role: Role, opacity: f64) {
        self.area(vec![a, (b.0, a.1), b, (a.0, b.1)], role, opacity);
    }

    /// A filled circle.
    pub(crate) fn dot(&mut self, at: Place, radius: f64, role: Role) {
        if finite(&at) {
            self.shapes.push(Shape::Dot { at, radius, role });
        }
    }

    /// A line of text.
    pub(crate) fn text(
        &mut self,
        at: Place,
        text: &str,
        role: Role,
        size: f64,
        anchor: Anchor,
        weight: Weight,
    ) {
        if finite(&at) && !text.is_empty() {
            self.shapes.push(Shape::Text {
                at,
                text: clean(text),
                role,
                size,
                anchor,
                weight,
            });
        }
    }
}

fn finite(place: &Place) -> bool {
    place.0.is_finite() && place.1.is_finite()
}
