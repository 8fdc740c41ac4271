//! The picture of a table.

use crate::predistort::Table;
use crate::report::figures::{LookupCurve, LookupFigure};
use crate::report::page::CaptionedFigure;

/// The table's words beside the exact inverse.
pub fn lookup_figure(table: &Table) -> CaptionedFigure {
    let lookup = &table.lookup;
    let words = lookup.words();
    let magnitude: Vec<f64> = (0..words.len())
        .map(|index| lookup.magnitude(index))
        .collect();
    let exact = &table.entries;
    let figure = LookupFigure {
        title: "Table".to_owned(),
        control_unit: table.control.unit(),
        curves: vec![
            LookupCurve {
                name: "table".to_owned(),
                magnitude: magnitude.clone(),
                control_v: words
                    .iter()
                    .map(|&word| lookup.control(word) * table.full_control)
                    .collect(),
                phase_deg: words
                    .iter()
                    .map(|&word| lookup.phase_rad(word).to_degrees())
                    .collect(),
            },
            LookupCurve {
                name: "before rounding".to_owned(),
                magnitude: exact.iter().map(|entry| entry.magnitude).collect(),
                control_v: exact
                    .iter()
                    .map(|entry| entry.control * table.full_control)
                    .collect(),
                phase_deg: exact
                    .iter()
                    .map(|entry| entry.phase_rad.to_degrees())
                    .collect(),
            },
            LookupCurve {
                name: "without predistortion".to_owned(),
                magnitude: vec![0.0, 1.0],
                control_v: vec![0.0, table.full_control],
                phase_deg: vec![0.0, 0.0],
            },
        ],
    }
    .figure();
    CaptionedFigure {
        figure,
        caption:
            "What the table asks of the control and adds to the phase for each wanted magnitude."
                .to_owned(),
    }
}
