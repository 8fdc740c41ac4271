//! Where a table stands in a scheme, and what lies behind it: the scheme's own law and the map, as one map.
//!
//! `supply`: the table is the law, its words are supplies, and the map itself lies behind it. A scheme with a law of its own
//! keeps it: the table's words are magnitudes for the law, and behind them lies
//!
//! ```text
//! output(m) = V(law(m))        m: a part of full output, V: the map
//! ```

use std::f64::consts::FRAC_PI_2;

use num_complex::Complex64;

use super::angle::{AngleLaw, AngleTable};
use super::outphase::Combining;
use super::scheme::Scheme;
use super::width::{Inverse, WidthLaw, WidthScheme};
use crate::map::{Control, Map, MapError, MapPoint};

/// Points of law and map together.
const POINTS: usize = 4096;

/// What the words of a table in front of a scheme are.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum TablePlace {
    /// The control itself; the scheme's shaping is in the table.
    Control,
    /// Another magnitude for the scheme's own law, 0 to 1.
    Magnitude,
}

/// Why nothing can stand in front of a scheme.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum NoCorrection {
    /// Rails follow the magnitude.
    #[error(
        "levels chooses its rail by the magnitude that a table would move, and its output jumps where rails change: no single table in front undoes that. law = \"inverse\" undoes the map on each rail"
    )]
    Rails,
    /// A train of pulses.
    #[error(
        "burst turns the magnitude into pulses of full output, whose mean goes straight with it: nothing static is there to undo, and what edges and transitions cost no table undoes"
    )]
    Pulses,
    /// The combiner's output is a straight line.
    #[error(
        "outphase with isolated branches is straight: there is nothing to undo. Mismatch of the branches is no function of the magnitude alone"
    )]
    Isolated,
    /// The comparison's linear stage.
    #[error("class_b is an ideal linear stage: there is nothing to undo")]
    Linear,
}

/// Why no table can be made from the map.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum NoInverse {
    /// Nothing can stand there.
    #[error(transparent)]
    Place(#[from] NoCorrection),
    /// The scheme takes width or angle from the inverse of the map.
    #[error(
        "nothing to undo: law = \"inverse\" already takes {control} and phase from the map itself. A table in front goes with law = \"{instead}\" or \"amplitude\""
    )]
    AlreadyInverse {
        /// What the law gives.
        control: &'static str,
        /// The law without knowledge of the stage.
        instead: &'static str,
    },
    /// Law and map make no map.
    #[error(transparent)]
    Map(#[from] MapError),
}

impl Scheme {
    /// Where a table or polynomial stands.
    ///
    /// # Errors
    /// [`NoCorrection`] for schemes that take none.
    pub fn table_place(&self) -> Result<TablePlace, NoCorrection> {
        match self {
            Self::Supply(_) => Ok(TablePlace::Control),
            Self::Width(_) => Ok(TablePlace::Magnitude),
            Self::Levels(_) => Err(NoCorrection::Rails),
            Self::Burst(_) => Err(NoCorrection::Pulses),
            Self::Outphase(scheme) => match scheme.combining {
                Combining::Joined(_) => Ok(TablePlace::Magnitude),
                Combining::Isolated => Err(NoCorrection::Isolated),
            },
            Self::ClassB(_) => Err(NoCorrection::Linear),
        }
    }

    /// Whether the inverse of its map leaves anything for a table to do.
    ///
    /// # Errors
    /// [`NoInverse`] where it does not.
    pub fn invertible(&self) -> Result<TablePlace, NoInverse> {
        let place = self.table_place()?;
        let already = |control, instead| Err(NoInverse::AlreadyInverse { control, instead });
        match self {
            Self::Width(scheme) if scheme.law == WidthLaw::Inverse => already("the width", "sine"),
            Self::Outphase(scheme) => match scheme.combining {
                Combining::Joined(joined) if joined.law == AngleLaw::Inverse => {
                    already("the angle", "cosine")
                }
                _ => Ok(place),
            },
            _ => Ok(place),
        }
    }

    /// What lies behind a table: `map` itself, or the law and `map` over the magnitude, at rest and without the
    /// imperfections of the paths. Pulses shorter than the shortest are held at it, as the scheme does.
    ///
    /// # Errors
    /// [`NoInverse`].
    pub fn forward(&self, map: &Map) -> Result<Map, NoInverse> {
        match (self.invertible()?, self) {
            (TablePlace::Magnitude, Self::Width(scheme)) => {
                let inverse = Inverse::new(map);
                over_magnitude(map, |m| width(scheme, &inverse, map, m))
            }
            (
                TablePlace::Magnitude,
                Self::Outphase(super::OutphaseScheme {
                    combining: Combining::Joined(joined),
                    ..
                }),
            ) => {
                let map = map.known();
                let table = AngleTable::new(map, joined.law);
                over_magnitude(map, |m| table.at(m, joined.law).0)
            }
            _ => Ok(map.clone()),
        }
    }
}

fn width(scheme: &WidthScheme, inverse: &Inverse, map: &Map, m: f64) -> f64 {
    let (lowest, full) = map.domain();
    let shortest = scheme.shortest_s * map.frequency_hz();
    let asked = scheme.law.width(inverse, full, m);
    asked.max(shortest).max(lowest).min(full)
}

/// `map` over the magnitude that `control` turns into its control. Points lie close near full output, where widths and
/// angles go with the root of what is missing; where magnitudes share one control, only the highest counts.
fn over_magnitude(map: &Map, control: impl Fn(f64) -> f64) -> Result<Map, NoInverse> {
    let mut points: Vec<MapPoint> = Vec::with_capacity(POINTS + 1);
    let (mut last, mut shared) = (f64::NAN, false);
    for step in 0..=POINTS {
        let m = (FRAC_PI_2 * step as f64 / POINTS as f64).sin();
        let at = control(m);
        if at == last {
            points.pop();
            shared = true;
        } else if let (true, Some(point)) = (shared, points.last_mut()) {
            // Where the control begins to move, between the two points.
            let (mut low, mut high) = (point.control, m);
            for _ in 0..50 {
                let middle = 0.5 * (low + high);
                if control(middle) == last {
                    low = middle;
                } else {
                    high = middle;
                }
            }
            point.control = low;
            shared = false;
        }
        last = at;
        points.push(MapPoint {
            control: m,
            output_v: map.output_held_v(at).0,
            supply_v: map.own_supply_v(),
            supply_a: None,
            efficiency: None,
            switch_peak_v: None,
            switch_peak_a: None,
            switch_min_v: None,
            closing_v: None,
            driver_w: None,
        });
    }
    // Branches that cancel leave rounding errors, whose phase means nothing.
    let full_v = points.last().map_or(0.0, |point| point.output_v.norm());
    for point in &mut points {
        if point.output_v.norm() < 1e-9 * full_v {
            point.output_v = Complex64::ZERO;
        }
    }
    Ok(Map::new(
        Control::Drive,
        map.origin(),
        map.frequency_hz(),
        map.load_ohm(),
        points,
    )?)
}
