//! Orbits and maps as text and pictures.

use super::figures::{MapFigure, OtherCurves, Quantity, WaveformFigure};
use super::picture::Figure;
use super::table::{Align, Table};
use super::text::{quantity, zeroed};
use crate::map::{Control, Map};
use crate::orbit::{Orbit, Waveform};
use crate::stage::Stage;
use crate::units;

/// From this voltage on a silicon body diode conducts, V (common practice).
const BODY_DIODE_V: f64 = 0.7;

/// What an engineer asks of one orbit, in rows of name, value and remark.
pub fn orbit_rows(stage: &Stage, orbit: &Orbit) -> Vec<[String; 3]> {
    let row = |name: &str, value: String, remark: String| [name.to_owned(), value, remark];
    let several = !orbit.switches.is_empty();
    let percent = |watt: f64| format!("{:.2} % of the supply power", 100.0 * watt / orbit.supply_w);
    let lost = |name: &str, watt: f64| {
        let watt = zeroed(watt, orbit.supply_w + orbit.driver_w);
        row(name, quantity(watt, "W", 4), percent(watt))
    };
    let slope_v = zeroed(
        orbit.closing_slope_v_per_s * stage.period_s(),
        orbit.supply_v,
    );
    let mut rows = vec![
        row(
            "output power",
            quantity(orbit.output_w, "W", 4),
            format!("{:.2} dBm", units::dbm_from_watt(orbit.output_w)),
        ),
        row(
            "output phasor",
            quantity(orbit.output_v.norm(), "V", 4),
            format!("peak, at {:.2} deg", orbit.output_v.arg().to_degrees()),
        ),
        row(
            "supply",
            quantity(orbit.supply_v, "V", 4),
            quantity(orbit.supply_a, "A", 4),
        ),
        row(
            "efficiency",
            format!("{:.2} %", 100.0 * orbit.efficiency),
            if orbit.driver_w > 0.0 {
                "output over supply and driver power".to_owned()
            } else {
                "output over supply power; the file tells no driver power".to_owned()
            },
        ),
        lost("lost in closed switch", orbit.losses.closed_switch),
        lost("lost in open switch", orbit.losses.open_switch),
        lost("lost in diode", orbit.losses.diode),
        lost("lost in feed", orbit.losses.feed),
        lost("lost in ladder", orbit.losses.ladder),
        lost("harmonics in load", orbit.losses.harmonics),
        lost("lost in driver", orbit.losses.driver),
        lost("drawn by driver", orbit.driver_w),
        row(
            if several {
                "peak switch voltage"
            } else {
                "peak drain voltage"
            },
            quantity(orbit.switch_peak_v, "V", 4),
            format!(
                "{:.3} times the supply",
                orbit.switch_peak_v / orbit.supply_v
            ),
        ),
        row(
            if several {
                "lowest switch voltage"
            } else {
                "lowest drain voltage"
            },
            quantity(zeroed(orbit.switch_min_v, orbit.supply_v), "V", 4),
            match (stage.switch.diode, orbit.diode_conductions) {
                (None, _) if several && orbit.switch_min_v < -BODY_DIODE_V => {
                    "beyond a rail: the body diodes, which the model leaves out, would conduct"
                        .to_owned()
                }
                (None, _) if several => "no body diode would conduct".to_owned(),
                (None, _) => "a diode would conduct below about -0.7 V".to_owned(),
                (Some(_), 0) => "the diode never conducts".to_owned(),
                (Some(_), 1) => "the diode conducts once a period".to_owned(),
                (Some(_), times) => format!("the diode conducts {times} times a period"),
            },
        ),
        row(
            "peak switch current",
            quantity(orbit.switch_peak_a, "A", 4),
            format!(
                "{:.3} times the supply current",
                orbit.switch_peak_a / orbit.supply_a
            ),
        ),
        row(
            if several {
                "switch at closing"
            } else {
                "drain at closing"
            },
            quantity(zeroed(orbit.closing_v, orbit.supply_v), "V", 4),
            format!("slope {} a period", quantity(slope_v, "V", 3)),
        ),
    ];
    for switch in &orbit.switches {
        rows.push(row(
            &format!("{} switch", switch.name),
            format!("loses {}", quantity(switch.lost_w, "W", 3)),
            format!(
                "{} to {}, {} to {}, closes at {}",
                quantity(switch.min_v, "V", 3),
                quantity(switch.peak_v, "V", 3),
                quantity(switch.min_a, "A", 3),
                quantity(switch.peak_a, "A", 3),
                quantity(switch.closing_v, "V", 3)
            ),
        ));
    }
    for (index, level) in orbit.harmonics_dbc.iter().enumerate() {
        rows.push(row(
            &format!("harmonic {}", index + 2),
            format!("{level:.1} dBc"),
            String::new(),
        ));
    }
    rows.push(row(
        "energy residual",
        format!("{:.1e}", orbit.energy_residual),
        "of the power that flows".to_owned(),
    ));
    rows
}

/// One orbit for the terminal.
pub fn orbit_text(stage: &Stage, orbit: &Orbit) -> String {
    let mut table = Table::new([("", Align::Left), ("", Align::Right), ("", Align::Left)]);
    for row in orbit_rows(stage, orbit) {
        table.row(row);
    }
    format!(
        "{}: {}, {} {:.1} % of the period, into {}\n\n{}",
        stage.title,
        quantity(stage.frequency_hz, "Hz", 6),
        if stage.is_pair() { "high" } else { "closed" },
        100.0 * orbit.drive.duty(),
        quantity(stage.load.ohm, "ohm", 4),
        table.text()
    )
}

/// One period as a picture.
pub fn waveform_figure(stage: &Stage, waveform: &Waveform) -> Figure {
    WaveformFigure {
        title: format!("{} at {}", stage.title, quantity(stage.supply_v, "V", 4)),
        time_s: waveform.time_s.clone(),
        drain_v: waveform.drain_v.clone(),
        switch_a: waveform.switch_a.clone(),
        load_v: waveform.load_v.clone(),
        closed_s: vec![waveform.closed_s],
        others: waveform
            .others
            .iter()
            .map(|other| OtherCurves {
                name: other.name.clone(),
                switch_a: other.switch_a.clone(),
                drain_v: other.drain_v.clone(),
            })
            .collect(),
        peak_drain: None,
        peak_current: None,
    }
    .figure()
}

/// The control's axis.
pub fn control_quantity(control: Control) -> Quantity {
    match control {
        Control::Supply => Quantity::new("supply", "V"),
        Control::Width => Quantity::new("closed part of the period", ""),
        Control::Drive => Quantity::new("wanted part of full output", ""),
        Control::Angle => Quantity::new("angle of each branch", "deg"),
    }
}

/// Phases of a map's points in degrees, following each other within half a turn.
pub fn phases_deg(map: &Map) -> Vec<f64> {
    map.points()
        .iter()
        .map(|point| {
            map.phase_at_rad(point.control)
                .map_or(f64::NAN, f64::to_degrees)
        })
        .collect()
}

/// A map as a picture.
pub fn map_figure(title: &str, map: &Map) -> Figure {
    let points = map.points();
    let known = |value: fn(&crate::map::MapPoint) -> Option<f64>| {
        points
            .iter()
            .map(value)
            .collect::<Option<Vec<f64>>>()
            .unwrap_or_default()
    };
    MapFigure {
        title: title.to_owned(),
        control: control_quantity(map.control()),
        control_values: points
            .iter()
            .map(|point| map.control().shown(point.control))
            .collect(),
        amplitude_v: points.iter().map(|point| point.output_v.norm()).collect(),
        phase_deg: phases_deg(map),
        efficiency: known(|point| point.efficiency),
        switch_peak_v: known(|point| point.switch_peak_v),
    }
    .figure()
}

/// How many rows of a map the terminal shows.
const TEXT_ROWS: usize = 21;

/// A map for the terminal: evenly chosen rows.
pub fn map_text(title: &str, map: &Map) -> String {
    let columns = [
        map.control().name(),
        "amplitude",
        "phase",
        "power",
        "current",
        "efficiency",
        "peak drain",
        "at closing",
    ];
    let mut table = Table::new(columns.map(|name| (name, Align::Right)));
    let phases = phases_deg(map);
    let points = map.points();
    let shown = points.len().min(TEXT_ROWS);
    for row in 0..shown {
        let index = row * (points.len() - 1) / (shown - 1).max(1);
        let point = &points[index];
        let optional = |value: Option<f64>, unit: &str| {
            value.map_or("-".to_owned(), |value| quantity(value, unit, 4))
        };
        table.row([
            map.control().show(point.control, 4),
            quantity(point.output_v.norm(), "V", 4),
            format!("{:.2} deg", phases[index]),
            quantity(point.output_v.norm_sqr() / (2.0 * map.load_ohm()), "W", 4),
            optional(point.supply_a, "A"),
            point
                .efficiency
                .map_or("-".to_owned(), |e| format!("{:.2} %", 100.0 * e)),
            optional(point.switch_peak_v, "V"),
            optional(
                point.closing_v.map(|volt| zeroed(volt, point.supply_v)),
                "V",
            ),
        ]);
    }
    let monotone = if map.control() == Control::Angle {
        let lowest_v = points.iter().filter_map(|point| point.switch_min_v);
        let lowest_v = lowest_v.fold(0.0, f64::min);
        let turned = points.windows(2).find(|pair| {
            pair[0].control >= 0.0 && pair[1].output_v.norm() >= pair[0].output_v.norm()
        });
        let mut text = match turned {
            None => "the amplitude falls with the angle: the map has an inverse".to_owned(),
            Some(pair) => format!(
                "the amplitude rises with the angle at {}",
                map.control().show(pair[0].control, 4)
            ),
        };
        if lowest_v < -BODY_DIODE_V {
            text.push_str(&format!(
                "\na switch sees down to {}: body diodes, which the model leaves out, would conduct",
                quantity(lowest_v, "V", 3)
            ));
        }
        text
    } else {
        rising(map)
    };
    let mut failed = String::new();
    if let Some(first) = map.failures().first() {
        failed = format!(
            "\npoints without an orbit, left out and not interpolated over: {}; the first at {}: {}",
            map.failures().len(),
            map.control().show(first.control, 4),
            first.reason
        );
    }
    format!(
        "{title}: {} of {} points over {}\n{monotone}{failed}\n\n{}",
        shown,
        points.len(),
        map.describe(),
        table.text()
    )
}

fn rising(map: &Map) -> String {
    match map.turns_at() {
        None => "the amplitude rises all the way: the map has an inverse".to_owned(),
        Some(control) => format!(
            "the amplitude stops rising at {}: no inverse from there on",
            map.control().show(control, 4)
        ),
    }
}
