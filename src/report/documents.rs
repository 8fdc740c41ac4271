//! Results as JSON documents. Key names are stable: keys may be added, never renamed.

use serde::Serialize;
use serde_json::{Value, json};

use crate::map::Map;
use crate::metrics::Spectrum;
use crate::orbit::Orbit;
use crate::stage::Stage;
use crate::study::{By, CheckResult, ReplayFacts};

/// The document of `quietedge solve`; `others` are further periodic states of the same stage.
pub fn solve_document(stage: &Stage, orbit: &Orbit, others: &[Orbit]) -> Value {
    let others: Vec<Value> = others
        .iter()
        .map(|other| {
            json!({
                "output_v": other.output_v_parts(),
                "output_w": other.output_w,
                "supply_a": other.supply_a,
                "switch_peak_v": other.switch_peak_v,
            })
        })
        .collect();
    let mut document = json!({
        "stage": stage.title,
        "frequency_hz": stage.frequency_hz,
        "supply_v": orbit.supply_v,
        "duty": orbit.drive.duty(),
        "load_ohm": stage.load.ohm,
        "orbit": {
            "output_v": orbit.output_v_parts(),
            "output_w": orbit.output_w,
            "supply_a": orbit.supply_a,
            "supply_w": orbit.supply_w,
            "driver_w": orbit.driver_w,
            "efficiency": orbit.efficiency,
            "losses_w": orbit.losses,
            "switch_peak_v": orbit.switch_peak_v,
            "switch_min_v": orbit.switch_min_v,
            "switch_peak_a": orbit.switch_peak_a,
            "switch_min_a": orbit.switch_min_a,
            "closing_v": orbit.closing_v,
            "closing_slope_v_per_s": orbit.closing_slope_v_per_s,
            "harmonics_dbc": orbit.harmonics_dbc,
            "diode_conductions": orbit.diode_conductions,
            "charge_residual": orbit.charge_residual,
            "energy_residual": orbit.energy_residual,
        },
        "other_orbits": others,
    });
    if !orbit.switches.is_empty() {
        document["orbit"]["switches"] = json!(orbit.switches);
    }
    document
}

#[derive(Serialize)]
struct Phasor {
    re: f64,
    im: f64,
}

impl Orbit {
    fn output_v_parts(&self) -> impl Serialize + use<> {
        Phasor {
            re: self.output_v.re,
            im: self.output_v.im,
        }
    }
}

/// The document of `quietedge map`, which a study can name in place of a stage.
pub fn map_document(title: &str, map: &Map) -> Value {
    let points: Vec<Value> = map
        .points()
        .iter()
        .map(|point| {
            json!({
                "control": point.control,
                "output_v": Phasor { re: point.output_v.re, im: point.output_v.im },
                "supply_v": point.supply_v,
                "supply_a": point.supply_a,
                "efficiency": point.efficiency,
                "switch_peak_v": point.switch_peak_v,
                "switch_peak_a": point.switch_peak_a,
                "switch_min_v": point.switch_min_v,
                "closing_v": point.closing_v,
                "driver_w": point.driver_w,
            })
        })
        .collect();
    json!({
        "title": title,
        "control": map.control().name(),
        "frequency_hz": map.frequency_hz(),
        "load_ohm": map.load_ohm(),
        "points": points,
        "failures": map.failures(),
    })
}

/// A map as the CSV file that a study can name in place of a stage. Absent columns are left out.
pub fn map_csv(title: &str, map: &Map) -> String {
    use std::fmt::Write;
    let mut text = String::new();
    let facts = [
        ("title", title.replace(['\n', '\r'], " ")),
        ("control", map.control().name().to_owned()),
        ("frequency", format!("{} Hz", map.frequency_hz())),
        ("load_resistance", format!("{} ohm", map.load_ohm())),
    ];
    for (key, value) in facts {
        let _ = writeln!(text, "# {key} = {value}");
    }
    for failure in map.failures() {
        let _ = writeln!(text, "# failed = {} {}", failure.control, failure.reason);
    }
    type Column = (&'static str, fn(&crate::map::MapPoint) -> Option<f64>);
    let columns: [Column; 10] = [
        ("control", |point| Some(point.control)),
        ("output_re_v", |point| Some(point.output_v.re)),
        ("output_im_v", |point| Some(point.output_v.im)),
        ("supply_v", |point| Some(point.supply_v)),
        ("supply_a", |point| point.supply_a),
        ("efficiency", |point| point.efficiency),
        ("switch_peak_v", |point| point.switch_peak_v),
        ("switch_peak_a", |point| point.switch_peak_a),
        ("closing_v", |point| point.closing_v),
        ("driver_w", |point| point.driver_w),
    ];
    let present: Vec<&Column> = columns
        .iter()
        .filter(|(_, value)| map.points().iter().all(|point| value(point).is_some()))
        .collect();
    let names: Vec<&str> = present.iter().map(|(name, _)| *name).collect();
    let _ = writeln!(text, "{}", names.join(","));
    for point in map.points() {
        let values: Vec<String> = present
            .iter()
            .filter_map(|(_, value)| value(point))
            .map(|value| value.to_string())
            .collect();
        let _ = writeln!(text, "{}", values.join(","));
    }
    text
}

/// The document of `quietedge check`.
pub fn check_document(result: &CheckResult) -> Value {
    json!({
        "study": result.study.title,
        "scheme": result.scheme().name(),
        "scheme_settings": result.scheme(),
        "seed": result.scheme().seed(),
        "signal": result.signal,
        "level": result.study.signal.level,
        "sampling": result.rate,
        "metrics": result.metrics,
        "symbols": result.symbols,
        "verdict": result.judgement.verdict,
        "stress": result.stress,
        "predistort": result.table.as_ref().map(|table| json!({
            "size": table.lookup.size(),
            "rate": table.lookup.rate(),
            "entries": table.counts(),
        })),
        "gate": result.gate.as_ref().map(|train| train.figures),
        "by": result.replay.as_ref().map_or(By::Map, |facts| facts.by),
        "replay": result.replay.as_ref().map(|facts| replay_document(result, facts)),
        "warnings": result.warnings,
    })
}

/// The replay of a check against its map; with `both` the map's own numbers and both spectra as well.
fn replay_document(result: &CheckResult, facts: &ReplayFacts) -> Value {
    let outcome = result.judgement.verdict.outcome;
    let both = facts.by == By::Both;
    let spectrum = |spectrum: &Spectrum| {
        json!({
            "from_hz": spectrum.offset_hz(0),
            "step_hz": spectrum.bin_hz,
            "mean_w_per_hz": spectrum.mean_w_per_hz,
        })
    };
    json!({
        "cycles": facts.cycles,
        "nmse_db": facts.nmse_db,
        "delay_s": facts.delay_s,
        "gain_db": facts.gain_db,
        "map_holds": facts.map_holds(outcome),
        "statement": facts.statement(outcome),
        "margins": facts.margins,
        "parting": facts.parting,
        "map": both.then(|| json!({
            "metrics": facts.map.metrics,
            "verdict": facts.map.judgement.verdict,
        })),
        "spectra": both.then(|| json!({
            "map": spectrum(&facts.map.output_spectrum),
            "replay": spectrum(&result.output_spectrum),
        })),
    })
}
