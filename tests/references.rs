//! The solver against outside numbers: SciPy orbits and class E closed forms, stored in tests/reference with
//! the tools' versions.

use std::f64::consts::TAU;

use quietedge::orbit::{Drive, Network, Orbit};
use quietedge::stage::Stage;
use serde_json::Value;

/// SciPy's integrator ran at tolerances that leave 1e-9 on phasors and powers and 1e-8 on peaks; the
/// acceptance level leaves room for stages with slow modes.
const RELATIVE: f64 = 1e-6;

/// Every linear orbit closes its energy balance to this.
const BALANCE: f64 = 1e-9;

fn orbits() -> Vec<(String, f64, Value, Orbit)> {
    let document: Value =
        serde_json::from_str(include_str!("reference/orbits.json")).expect("orbits.json");
    let stages = document["stages"].as_array().expect("stages");
    stages
        .iter()
        .map(|entry| {
            let name = entry["name"].as_str().expect("a name").to_owned();
            let toml = entry["toml"].as_str().expect("a stage file");
            let stage = Stage::parse(&name, toml).unwrap_or_else(|problem| panic!("{problem}"));
            let network = Network::new(&stage).unwrap_or_else(|error| panic!("{name}: {error}"));
            let drive = Drive::new(&stage.driver, stage.driver.duty);
            let orbit = network
                .orbit(stage.supply_v, &drive)
                .unwrap_or_else(|error| panic!("{name}: {error}"));
            (name, stage.frequency_hz, entry["results"].clone(), orbit)
        })
        .collect()
}

#[test]
fn orbits_agree_with_scipy() {
    let orbits = orbits();
    assert!(orbits.len() >= 30);
    let mut worst = (0.0, String::new());
    for (name, frequency_hz, expected, orbit) in &orbits {
        let number = |key: &str| {
            expected[key]
                .as_f64()
                .unwrap_or_else(|| panic!("{name}: {key}"))
        };
        let output = &expected["output_v"];
        let losses = &expected["losses_w"];
        let amplitude = orbit.output_v.norm();
        let loss = |key: &str| {
            losses[key]
                .as_f64()
                .unwrap_or_else(|| panic!("{name}: {key}"))
        };
        let re = output["re"].as_f64().expect("re");
        let im = output["im"].as_f64().expect("im");
        // (what, given, expected, scale of the relative error)
        let pairs = [
            ("output re", orbit.output_v.re, re, amplitude),
            ("output im", orbit.output_v.im, im, amplitude),
            (
                "output power",
                orbit.output_w,
                number("output_w"),
                orbit.output_w,
            ),
            (
                "supply current",
                orbit.supply_a,
                number("supply_a"),
                orbit.supply_a,
            ),
            (
                "supply power",
                orbit.supply_w,
                number("supply_w"),
                orbit.supply_w,
            ),
            (
                "efficiency",
                orbit.efficiency,
                number("efficiency"),
                orbit.efficiency,
            ),
            (
                "peak voltage",
                orbit.switch_peak_v,
                number("switch_peak_v"),
                orbit.switch_peak_v,
            ),
            (
                "peak current",
                orbit.switch_peak_a,
                number("switch_peak_a"),
                orbit.switch_peak_a,
            ),
            (
                "closing voltage",
                orbit.closing_v,
                number("closing_v"),
                orbit.switch_peak_v,
            ),
            (
                "closing slope",
                orbit.closing_slope_v_per_s,
                number("closing_slope_v_per_s"),
                // Peak voltage within one radian of the carrier.
                orbit.switch_peak_v * TAU * frequency_hz,
            ),
            (
                "switch loss",
                orbit.losses.closed_switch,
                loss("switch"),
                orbit.supply_w,
            ),
            (
                "open loss",
                orbit.losses.open_switch,
                loss("open_switch"),
                orbit.supply_w,
            ),
            ("feed loss", orbit.losses.feed, loss("feed"), orbit.supply_w),
            (
                "ladder loss",
                orbit.losses.ladder,
                loss("ladder"),
                orbit.supply_w,
            ),
        ];
        for (what, given, expected, scale) in pairs {
            let error = (given - expected).abs() / scale.abs();
            assert!(
                error <= RELATIVE,
                "{name}: {what} {given} against {expected}: {error:e}"
            );
            if error > worst.0 {
                worst = (error, format!("{name}: {what}"));
            }
        }
        for (order, level) in expected["harmonics_dbc"]
            .as_array()
            .expect("levels")
            .iter()
            .enumerate()
        {
            let level = level.as_f64().expect("a level");
            let given = orbit.harmonics_dbc[order];
            // Levels near the integrator's noise are only noise.
            if level > -160.0 {
                assert!(
                    (given - level).abs() < 1e-4,
                    "{name}: harmonic {}: {given} {level}",
                    order + 2
                );
            }
        }
        assert!(
            orbit.energy_residual.abs() < BALANCE,
            "{name}: energy residual {:e}",
            orbit.energy_residual
        );
    }
    println!(
        "{} stages, worst relative difference {:.1e} ({})",
        orbits.len(),
        worst.0,
        worst.1
    );
}
