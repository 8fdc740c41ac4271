//! The stage over the angle of its load, as text, pictures and documents.

use std::fmt::Write;

use serde_json::{Value, json};

use super::figures::MismatchFigure;
use super::stress::stress_of;
use super::table::{Align, Table};
use super::text::{quantity, zeroed};
use crate::map::{LoadMap, LoadPoint};
use crate::stage::Stage;
use crate::units;
use crate::verdict::{Outcome, Ratings};

/// How many loads the terminal shows.
const TEXT_ROWS: usize = 24;

/// A load in words: `61.3 + j 27.2 ohm`.
fn impedance(point: &LoadPoint) -> String {
    let z = point.impedance_ohm;
    let sign = if z.im < 0.0 { '-' } else { '+' };
    format!("{:.2} {sign} j {:.2} ohm", z.re, z.im.abs())
}

/// The worst of each figure, in rows of name, value, and load.
fn extremes(map: &LoadMap) -> Vec<[String; 3]> {
    let place = |point: &LoadPoint| {
        format!(
            "at {:.1} deg, {}",
            point.angle_rad.to_degrees(),
            impedance(point)
        )
    };
    type Value = fn(&LoadPoint) -> f64;
    let mut rows = Vec::new();
    let mut add = |name: &str, value: Value, sign: f64, shown: &dyn Fn(f64) -> String| {
        let worst = map
            .points
            .iter()
            .max_by(|a, b| (sign * value(a)).total_cmp(&(sign * value(b))));
        if let Some(point) = worst {
            rows.push([name.to_owned(), shown(value(point)), place(point)]);
        }
    };
    let watts = |watt: f64| quantity(watt, "W", 4);
    let percent = |share: f64| format!("{:.2} %", 100.0 * share);
    let volts = |volt: f64| quantity(volt, "V", 4);
    let amps = |amp: f64| quantity(amp, "A", 4);
    add("lowest power", |p| p.orbit.output_w, -1.0, &watts);
    add("highest power", |p| p.orbit.output_w, 1.0, &watts);
    add("lowest efficiency", |p| p.orbit.efficiency, -1.0, &percent);
    add("peak drain voltage", |p| p.orbit.switch_peak_v, 1.0, &volts);
    add(
        "lowest drain voltage",
        |p| p.orbit.switch_min_v,
        -1.0,
        &volts,
    );
    add("peak switch current", |p| p.orbit.switch_peak_a, 1.0, &amps);
    add(
        "largest at closing",
        |p| p.orbit.closing_v.abs(),
        1.0,
        &volts,
    );
    if let Ok(matched) = &map.matched {
        rows.push([
            "matched load".to_owned(),
            quantity(matched.output_w, "W", 4),
            format!(
                "{:.2} %, peaks {} and {}",
                100.0 * matched.efficiency,
                quantity(matched.switch_peak_v, "V", 4),
                quantity(matched.switch_peak_a, "A", 4)
            ),
        ]);
    }
    rows
}

/// The map for the terminal: the worst of everything, then evenly chosen loads.
pub fn load_map_text(stage: &Stage, map: &LoadMap, ratings: &Ratings) -> String {
    let mut worst = Table::new([("", Align::Left), ("", Align::Right), ("", Align::Left)]);
    for row in extremes(map) {
        worst.row(row);
    }
    let mut columns = vec![
        "angle",
        "load",
        "power",
        "over matched",
        "phase",
        "efficiency",
        "peak drain",
        "peak current",
        "at closing",
    ];
    if !ratings.is_empty() {
        columns.push("ratings");
    }
    let mut table = Table::new(columns.into_iter().map(|name| (name, Align::Right)));
    let shown = map.points.len().min(TEXT_ROWS);
    for row in 0..shown {
        let point = &map.points[row * map.points.len() / shown];
        let orbit = &point.orbit;
        let over = map.matched.as_ref().map_or("-".to_owned(), |matched| {
            format!("{:+.2} dB", units::db(orbit.output_w / matched.output_w))
        });
        let mut cells = vec![
            format!("{:.1} deg", point.angle_rad.to_degrees()),
            impedance(point),
            quantity(orbit.output_w, "W", 4),
            over,
            format!("{:.2} deg", orbit.output_v.arg().to_degrees()),
            format!("{:.2} %", 100.0 * orbit.efficiency),
            quantity(orbit.switch_peak_v, "V", 4),
            quantity(orbit.switch_peak_a, "A", 4),
            quantity(zeroed(orbit.closing_v, orbit.supply_v), "V", 4),
        ];
        if !ratings.is_empty() {
            let outcome = ratings.outcome(&stress_of(orbit));
            cells.push(super::check::outcome(outcome).word().to_owned());
        }
        table.row(cells);
    }
    let mut failed = String::new();
    if let Some(first) = map.failures.first() {
        failed = format!(
            "\nloads without an orbit, left out and not interpolated over: {}; the first at {:.2} deg: {}",
            map.failures.len(),
            first.control.to_degrees(),
            first.reason
        );
    }
    if let Err(reason) = &map.matched {
        let _ = write!(failed, "\nthe matched load has no orbit: {reason}");
    }
    format!(
        "{}: standing-wave ratio {:.4} against {} at {}, {} of {} loads; power is that in the real part of the load{failed}\n\n{}\n\n{}",
        stage.title,
        map.vswr,
        quantity(map.reference_ohm, "ohm", 4),
        quantity(map.frequency_hz, "Hz", 6),
        shown,
        map.points.len(),
        worst.text(),
        table.text()
    )
}

/// The map as pictures: over the angle and around it.
pub fn load_map_figure(stage: &Stage, map: &LoadMap, ratings: &Ratings) -> MismatchFigure {
    // Failed loads stand among the others and break the curves.
    let mut rows: Vec<(f64, [f64; 4])> = map
        .points
        .iter()
        .map(|point| {
            let orbit = &point.orbit;
            let values = [
                orbit.output_w,
                orbit.efficiency,
                orbit.switch_peak_v,
                orbit.switch_peak_a,
            ];
            (point.angle_rad.to_degrees(), values)
        })
        .chain(
            map.failures
                .iter()
                .map(|failure| (failure.control.to_degrees(), [f64::NAN; 4])),
        )
        .collect();
    rows.sort_by(|a, b| a.0.total_cmp(&b.0));
    // A whole turn ends where it began.
    let turn = rows.len() as f64 * (rows.get(1).map_or(0.0, |row| row.0) - rows[0].0);
    if (turn - 360.0).abs() < 1e-6 {
        rows.push((rows[0].0 + 360.0, rows[0].1));
    }
    let column = |index: usize| rows.iter().map(|row| row.1[index]).collect();
    MismatchFigure {
        title: format!(
            "{} at a standing-wave ratio of {}",
            stage.title,
            quantity(map.vswr, "", 4)
        ),
        angle_deg: rows.iter().map(|row| row.0).collect(),
        output_w: column(0),
        efficiency: column(1),
        switch_peak_v: column(2),
        switch_peak_a: column(3),
        matched: map.matched.as_ref().ok().map(|orbit| {
            [
                orbit.output_w,
                orbit.efficiency,
                orbit.switch_peak_v,
                orbit.switch_peak_a,
            ]
        }),
        rating_v: ratings.peak_voltage_v,
        rating_a: ratings.peak_current_a,
    }
}

/// The document of `quietedge map --control load`.
pub fn load_map_document(stage: &Stage, map: &LoadMap) -> Value {
    let complex = |z: num_complex::Complex64| json!({ "re": z.re, "im": z.im });
    let points: Vec<Value> = map
        .points
        .iter()
        .map(|point| {
            let orbit = &point.orbit;
            json!({
                "control": point.angle_rad,
                "angle_deg": point.angle_rad.to_degrees(),
                "reflection": complex(point.reflection),
                "load_ohm": complex(point.impedance_ohm),
                "output_v": complex(orbit.output_v),
                "load_v": complex(point.plane_v()),
                "output_w": orbit.output_w,
                "supply_v": orbit.supply_v,
                "supply_a": orbit.supply_a,
                "efficiency": orbit.efficiency,
                "switch_peak_v": orbit.switch_peak_v,
                "switch_peak_a": orbit.switch_peak_a,
                "switch_min_v": orbit.switch_min_v,
                "closing_v": orbit.closing_v,
                "driver_w": orbit.driver_w,
                "energy_residual": orbit.energy_residual,
            })
        })
        .collect();
    json!({
        "title": stage.title,
        "control": "load",
        "frequency_hz": map.frequency_hz,
        "vswr": map.vswr,
        "reference_ohm": map.reference_ohm,
        "matched": map.matched.as_ref().ok().map(|orbit| json!({
            "output_v": complex(orbit.output_v),
            "output_w": orbit.output_w,
            "efficiency": orbit.efficiency,
            "switch_peak_v": orbit.switch_peak_v,
            "switch_peak_a": orbit.switch_peak_a,
            "closing_v": orbit.closing_v,
        })),
        "points": points,
        "failures": map.failures,
    })
}

/// The map as CSV: facts in comments, a row for every load.
pub fn load_map_csv(stage: &Stage, map: &LoadMap, ratings: &Ratings) -> String {
    let mut text = format!(
        "# title = {}\n# control = load\n# frequency = {} Hz\n# reference = {} ohm\n# vswr = {}\n",
        stage.title.replace(['\n', '\r'], " "),
        map.frequency_hz,
        map.reference_ohm,
        map.vswr
    );
    for failure in &map.failures {
        let _ = writeln!(text, "# failed = {} {}", failure.control, failure.reason);
    }
    text.push_str(
        "angle_deg,load_re_ohm,load_im_ohm,output_re_v,output_im_v,output_w,supply_a,efficiency,switch_peak_v,\
         switch_peak_a,switch_min_v,closing_v",
    );
    text.push_str(if ratings.is_empty() {
        "\n"
    } else {
        ",ratings\n"
    });
    for point in &map.points {
        let orbit = &point.orbit;
        let values = [
            point.angle_rad.to_degrees(),
            point.impedance_ohm.re,
            point.impedance_ohm.im,
            orbit.output_v.re,
            orbit.output_v.im,
            orbit.output_w,
            orbit.supply_a,
            orbit.efficiency,
            orbit.switch_peak_v,
            orbit.switch_peak_a,
            orbit.switch_min_v,
            orbit.closing_v,
        ];
        let values: Vec<String> = values.iter().map(f64::to_string).collect();
        text.push_str(&values.join(","));
        if !ratings.is_empty() {
            let within = ratings.outcome(&stress_of(orbit)) == Outcome::Within;
            text.push_str(if within { ",within" } else { ",outside" });
        }
        text.push('\n');
    }
    text
}
