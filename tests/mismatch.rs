//! The stage over the angle of its load's reflection coefficient, against outside numbers and itself.

use std::f64::consts::TAU;

use proptest::prelude::*;
use quietedge::map::{LoadMap, LoadSweep, LoadSweepError};
use quietedge::orbit::{Drive, Network, Orbit};
use quietedge::stage::{Load, Stage};
use serde_json::Value;

/// SciPy's DOP853 at rtol 1e-13, and both solvers' rounding.
const SCIPY: f64 = 1e-8;

/// Exact solutions of the same stage, whose elements differ by rounding.
const ROUNDING: f64 = 1e-9;

const CURVED: &str = include_str!("reference/bench_everything.stage.toml");

fn number(value: &Value, key: &str) -> f64 {
    value[key]
        .as_f64()
        .unwrap_or_else(|| panic!("{key} of {value}"))
}

fn stored() -> Value {
    serde_json::from_str(include_str!("reference/mismatch.json")).expect("mismatch.json")
}

fn stage() -> Stage {
    Stage::parse("stored", stored()["toml"].as_str().expect("a stage")).expect("a stage")
}

fn curved() -> Stage {
    Stage::parse("curved", CURVED).expect("a stage")
}

fn turn(stage: &Stage, vswr: f64, points: usize) -> LoadMap {
    let sweep = LoadSweep::turn(vswr, points).expect("a sweep");
    sweep.solve(stage, || ()).expect("a map")
}

fn own(stage: &Stage) -> Orbit {
    let network = Network::new(stage).expect("a network");
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    network.orbit(stage.supply_v, &drive).expect("an orbit")
}

#[test]
fn loads_agree_with_scipy() {
    let stage = stage();
    let document = stored();
    let points = document["points"].as_array().expect("points");
    let mut worst = 0.0f64;
    let mut seen = 0;
    for vswr in [2.0, 6.0] {
        let map = turn(&stage, vswr, 12);
        assert!(map.failures.is_empty(), "{:?}", map.failures);
        for point in &map.points {
            let expected = points
                .iter()
                .find(|expected| {
                    number(expected, "vswr") == vswr
                        && (number(expected, "angle_deg") - point.angle_rad.to_degrees()).abs()
                            < 1e-9
                })
                .expect("the same load");
            seen += 1;
            let orbit = &point.orbit;
            let amplitude = orbit.output_v.norm();
            let power = orbit.supply_w;
            let output = &expected["output_v"];
            for (given, expected, scale) in [
                (
                    point.impedance_ohm.re,
                    expected["load_ohm"][0].as_f64().unwrap(),
                    50.0,
                ),
                (
                    point.impedance_ohm.im,
                    expected["load_ohm"][1].as_f64().unwrap(),
                    50.0,
                ),
                (orbit.output_v.re, number(output, "re"), amplitude),
                (orbit.output_v.im, number(output, "im"), amplitude),
                (orbit.output_w, number(expected, "output_w"), power),
                (orbit.supply_w, number(expected, "supply_w"), power),
                (orbit.efficiency, number(expected, "efficiency"), 1.0),
                (
                    orbit.switch_peak_v,
                    number(expected, "switch_peak_v"),
                    orbit.switch_peak_v,
                ),
                (
                    orbit.switch_peak_a,
                    number(expected, "switch_peak_a"),
                    orbit.switch_peak_a,
                ),
                (
                    orbit.closing_v,
                    number(expected, "closing_v"),
                    orbit.switch_peak_v,
                ),
            ] {
                let error = (given - expected).abs() / scale;
                assert!(
                    error < SCIPY,
                    "{vswr} {}: {given} {expected}",
                    point.angle_rad
                );
                worst = worst.max(error);
            }
        }
    }
    assert_eq!(seen, points.len());
    println!("{seen} mismatched loads against SciPy: worst {worst:.1e}");
}

#[test]
fn no_reflection_is_the_matched_load_to_the_bit() {
    for stage in [stage(), curved()] {
        let expected = own(&stage);
        let map = turn(&stage, 1.0, 7);
        assert_eq!(map.matched.as_ref(), Ok(&expected));
        assert_eq!(map.points.len(), 7);
        for point in &map.points {
            assert_eq!(point.orbit, expected);
        }
    }
}

#[test]
fn power_is_conserved_and_goes_into_the_real_part() {
    for (stage, residual) in [(stage(), 1e-9), (curved(), 1e-6)] {
        for vswr in [1.3, 3.0, 12.0] {
            let map = turn(&stage, vswr, 16);
            assert!(map.failures.is_empty(), "{:?}", map.failures);
            for point in &map.points {
                let orbit = &point.orbit;
                let into_real = orbit.output_v.norm_sqr() / (2.0 * point.impedance_ohm.re);
                assert!((orbit.output_w - into_real).abs() <= 1e-12 * into_real);
                // The same power from voltage and current at the whole load.
                let current = orbit.output_v / point.impedance_ohm.re;
                let whole = 0.5 * (point.plane_v() * current.conj()).re;
                assert!((whole - into_real).abs() <= 1e-12 * into_real);
                let left =
                    orbit.supply_w + orbit.driver_w - orbit.output_w - orbit.losses.total_w();
                let flows = orbit.supply_w.abs() + orbit.driver_w;
                assert!(
                    left.abs() <= residual * flows,
                    "{vswr} {}: {left}",
                    point.angle_rad
                );
            }
        }
    }
}

#[test]
fn a_load_in_the_file_is_the_load_of_the_map() {
    let text = stored()["toml"].as_str().expect("a stage").to_owned();
    for keys in [
        "reflection = { magnitude = 0.33, angle = \"40 deg\" }",
        "reflection = { vswr = 1.985074626865672, angle = \"-320 deg\" }",
    ] {
        let text = text.replacen(
            "resistance = \"50 ohm\"\n",
            &format!("resistance = \"50 ohm\"\n{keys}\n"),
            1,
        );
        let stage = Stage::parse("reflecting", &text).expect("a stage");
        let angle_rad = 40f64.to_radians();
        let sweep = LoadSweep {
            vswr: 1.33 / 0.67,
            angles_rad: vec![angle_rad],
        };
        // The reference is the stated resistance, whatever the file's own reflection.
        let map = sweep.solve(&stage, || ()).expect("a map");
        let (given, expected) = (own(&stage), &map.points[0].orbit);
        assert_eq!(map.reference_ohm, 50.0);
        assert!((given.output_v - expected.output_v).norm() < ROUNDING * given.output_v.norm());
        assert!((given.supply_a - expected.supply_a).abs() < ROUNDING * given.supply_a);
    }
}

#[test]
fn sweeps_that_make_no_sense_are_refused() {
    assert_eq!(
        LoadSweep::turn(0.9, 8),
        Err(LoadSweepError::Vswr { given: 0.9 })
    );
    assert!(matches!(
        LoadSweep::turn(f64::NAN, 8),
        Err(LoadSweepError::Vswr { .. })
    ));
    for (from, to, points) in [
        (1.0, 1.0, 5),
        (0.0, 7.0, 5),
        (0.0, 1.0, 1),
        (0.0, f64::INFINITY, 9),
    ] {
        let refused = LoadSweep::between(2.0, from, to, points);
        assert!(
            matches!(refused, Err(LoadSweepError::Range { .. })),
            "{refused:?}"
        );
    }
}

#[test]
fn a_load_without_an_orbit_is_named_and_left_out() {
    // A lossless shunt branch that rings at the second harmonic with the load out of the way is no matter; a blocked
    // direct current is: an ideal choke into nothing but capacitors.
    let text = "frequency = \"1 MHz\"\nsupply = { voltage = 5 }\nswitch = { closed_resistance = 0.1 }\n\
                drain = { capacitance = \"1 nF\" }\nfeed = { choke = true }\ndriver = { swing = 3, rise = \"30 ns\", \
                fall = \"1200 ns\", gate_charge = \"1 nC\" }\n[load]\nresistance = 50\n";
    let text = text.replace(
        "drain = { capacitance = \"1 nF\" }",
        "drain = { capacitance = \"1 nF\", gate_coupling = \"1 pF\" }",
    );
    let stage = Stage::parse("edges", &text).expect("a stage");
    let sweep = LoadSweep::turn(2.0, 8).expect("a sweep");
    match sweep.solve(&stage, || ()) {
        Err(LoadSweepError::NoPoint { reason, .. }) => {
            assert!(reason.contains("half the gate's rise"), "{reason}")
        }
        other => panic!("{other:?}"),
    }
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::with_cases(24) })]

    #[test]
    fn the_angle_repeats_after_a_turn(vswr in 1.05..20.0f64, angle in -6.0..6.0f64) {
        let stage = stage();
        let solve = |angle_rad: f64| LoadSweep { vswr, angles_rad: vec![angle_rad] }.solve(&stage, || ());
        let (Ok(here), Ok(there)) = (solve(angle), solve(angle + TAU)) else {
            return Err(TestCaseError::fail("no orbit"));
        };
        let (a, b) = (&here.points[0].orbit, &there.points[0].orbit);
        prop_assert!((a.output_v - b.output_v).norm() < ROUNDING * a.output_v.norm());
        prop_assert!((a.switch_peak_v - b.switch_peak_v).abs() < ROUNDING * a.switch_peak_v);
        prop_assert!((a.efficiency - b.efficiency).abs() < ROUNDING);
    }

    #[test]
    fn impedance_and_reflection_are_inverse(magnitude in 0.0..0.98f64, angle in -7.0..7.0f64, ohm in 1e-2..1e4f64) {
        let gamma = num_complex::Complex64::from_polar(magnitude, angle);
        let load = Load::reflecting(gamma, ohm, 1e8);
        prop_assert!(load.ohm > 0.0);
        prop_assert!((load.reflection(1e8) - gamma).norm() < 1e-11);
    }
}
