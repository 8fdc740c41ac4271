//! Curved stages against outside numbers: shooting with SciPy's Radau (rtol 1e-10), stored in
//! `tests/reference/curved.json` with the tools' versions.

use std::io::{self, Cursor};

use quietedge::input::{Files, ReadSeek};
use quietedge::orbit::{Drive, Network, Orbit};
use quietedge::stage::Stage;
use serde_json::Value;

/// On phasor and powers.
const RELATIVE: f64 = 1e-6;

/// On peaks of voltage and current, whose dense output SciPy gives to third order only.
const PEAK: f64 = 1e-5;

struct Tables(Value);

impl Files for Tables {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        let text = self.0[name].as_str().ok_or(io::ErrorKind::NotFound)?;
        Ok(Box::new(Cursor::new(text.to_owned())))
    }
}

fn number(value: &Value, key: &str) -> f64 {
    value[key].as_f64().unwrap_or_else(|| panic!("{key}"))
}

/// (what, given, expected, scale, allowed)
fn pairs(orbit: &Orbit, expected: &Value) -> Vec<(&'static str, f64, f64, f64, f64)> {
    let output = &expected["output_v"];
    let amplitude = number(output, "re").hypot(number(output, "im"));
    let power = number(expected, "supply_w").abs() + number(expected, "driver_w").abs();
    let (peak_v, peak_a) = (
        number(expected, "switch_peak_v"),
        number(expected, "switch_peak_a"),
    );
    let losses = &expected["losses_w"];
    let mut pairs = vec![
        (
            "output re",
            orbit.output_v.re,
            number(output, "re"),
            amplitude,
            RELATIVE,
        ),
        (
            "output im",
            orbit.output_v.im,
            number(output, "im"),
            amplitude,
            RELATIVE,
        ),
        (
            "output power",
            orbit.output_w,
            number(expected, "output_w"),
            orbit.output_w,
            2.0 * RELATIVE,
        ),
        (
            "supply power",
            orbit.supply_w,
            number(expected, "supply_w"),
            power,
            RELATIVE,
        ),
        (
            "driver power",
            orbit.driver_w,
            number(expected, "driver_w"),
            power,
            RELATIVE,
        ),
        (
            "efficiency",
            orbit.efficiency,
            number(expected, "efficiency"),
            1.0,
            RELATIVE,
        ),
        ("peak voltage", orbit.switch_peak_v, peak_v, peak_v, PEAK),
        (
            "lowest voltage",
            orbit.switch_min_v,
            number(expected, "switch_min_v"),
            peak_v,
            PEAK,
        ),
        ("peak current", orbit.switch_peak_a, peak_a, peak_a, PEAK),
        (
            "lowest current",
            orbit.switch_min_a,
            number(expected, "switch_min_a"),
            peak_a,
            PEAK,
        ),
        (
            "closing voltage",
            orbit.closing_v,
            number(expected, "closing_v"),
            peak_v,
            PEAK,
        ),
    ];
    for (what, given) in [
        ("closed_switch", orbit.losses.closed_switch),
        ("open_switch", orbit.losses.open_switch),
        ("diode", orbit.losses.diode),
        ("feed", orbit.losses.feed),
        ("ladder", orbit.losses.ladder),
        ("harmonics", orbit.losses.harmonics),
        ("driver", orbit.losses.driver),
    ] {
        pairs.push((what, given, number(losses, what), power, RELATIVE));
    }
    pairs
}

#[test]
fn curved_orbits_agree_with_scipy() {
    let document: Value =
        serde_json::from_str(include_str!("reference/curved.json")).expect("curved.json");
    let stages = document["stages"].as_array().expect("stages");
    assert!(stages.len() >= 20, "{} stages", stages.len());
    let (mut worst, mut faults) = ((0.0, String::new()), Vec::new());
    let (mut worst_balance, mut worst_charge) = (0.0f64, 0.0f64);
    for entry in stages {
        let name = entry["name"].as_str().expect("a name");
        let toml = entry["toml"].as_str().expect("a stage file");
        let stage = Stage::read(name, toml, &Tables(entry["tables"].clone()))
            .unwrap_or_else(|problem| panic!("{problem}"));
        assert!(stage.is_curved(), "{name}");
        let network = Network::new(&stage).unwrap_or_else(|error| panic!("{name}: {error}"));
        let drive = Drive::new(&stage.driver, stage.driver.duty);
        let orbit = match network.orbit(stage.supply_v, &drive) {
            Ok(orbit) => orbit,
            Err(error) => {
                faults.push(format!("{name}: {error}"));
                continue;
            }
        };
        let expected = &entry["results"];
        for (what, given, expected, scale, allowed) in pairs(&orbit, expected) {
            let error = (given - expected).abs() / scale.abs();
            if error.is_nan() || error > allowed {
                faults.push(format!(
                    "{name}: {what} {given} against {expected}: {error:.1e}"
                ));
            }
            if error / allowed > worst.0 {
                worst = (error / allowed, format!("{name}: {what}"));
            }
        }
        let conductions = expected["conductions"].as_u64().expect("a count");
        if orbit.diode_conductions as u64 != conductions {
            faults.push(format!(
                "{name}: {} conductions against {conductions}",
                orbit.diode_conductions
            ));
        }
        worst_balance = worst_balance.max(orbit.energy_residual.abs());
        worst_charge = worst_charge.max(orbit.charge_residual);
    }
    println!(
        "{} stages: worst {:.2} of the allowed difference ({}), balance {worst_balance:.1e}, charge {worst_charge:.1e}",
        stages.len(),
        worst.0,
        worst.1
    );
    assert!(faults.is_empty(), "{}", faults.join("\n"));
    // The aim is 1e-6; the bank does much better.
    assert!(worst_balance < 3e-7, "{worst_balance:e}");
    assert!(worst_charge < 1e-12, "{worst_charge:e}");
}
