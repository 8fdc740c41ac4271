//! Ratings of the switch beside orbits and maps.

use serde_json::{Value, json};

use super::table::{Align, Table};
use super::text::quantity;
use crate::map::{LoadMap, Map};
use crate::orbit::Orbit;
use crate::verdict::{Ratings, Stress, Stressed, Verdict};

/// What the switch stands in `orbit`.
pub fn stress_of(orbit: &Orbit) -> Stress {
    Stress {
        peak_v: orbit.switch_peak_v,
        peak_a: orbit.switch_peak_a,
    }
}

/// The stress of every point of a map; points of a file that does not tell it are left out.
pub fn stressed_map(map: &Map) -> Vec<Stressed> {
    let unit = map.control().unit();
    let points = map.points().iter();
    points
        .filter_map(|point| {
            Some(Stressed {
                place: format!(
                    "at {} {}",
                    map.control().name(),
                    quantity(point.control, unit, 4)
                ),
                stress: Stress {
                    peak_v: point.switch_peak_v?,
                    peak_a: point.switch_peak_a?,
                },
            })
        })
        .collect()
}

/// The stress of every load.
pub fn stressed_loads(map: &LoadMap) -> Vec<Stressed> {
    let points = map.points.iter();
    points
        .map(|point| Stressed {
            place: format!(
                "at a standing-wave ratio of {:.3} and {:.1} deg",
                map.vswr,
                point.angle_rad.to_degrees()
            ),
            stress: stress_of(&point.orbit),
        })
        .collect()
}

/// The checks for the terminal.
pub fn stress_text(verdict: &Verdict) -> String {
    let mut table = Table::new([("", Align::Left), ("", Align::Left), ("", Align::Left)]);
    for check in &verdict.checks {
        table.row([
            check.name.clone(),
            super::check::outcome(check.outcome).word().to_owned(),
            check.reason.clone(),
        ]);
    }
    table.text()
}

/// Adds `verdict` to a document, and to each of its `points` how it stands.
pub fn add_verdict(
    document: &mut Value,
    ratings: &Ratings,
    verdict: &Verdict,
    points: &[Stressed],
) {
    document["ratings"] = json!({
        "peak_voltage_v": ratings.peak_voltage_v,
        "peak_current_a": ratings.peak_current_a,
    });
    document["verdict"] = json!(verdict);
    if let Some(rows) = document["points"].as_array_mut()
        && rows.len() == points.len()
    {
        for (row, point) in rows.iter_mut().zip(points) {
            row["outcome"] = json!(ratings.outcome(&point.stress));
        }
    }
}
