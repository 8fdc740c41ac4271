//! The curved solver against the exact linear one, against plain settling, and against itself.

use super::curved::Curved;
use super::network::{Drive, Network};
use super::tracker::Tracker;
use crate::stage::{Diode, DrainCurve, Gate, Stage};

fn linear(feed: &str) -> Stage {
    let text = format!(
        r#"
frequency = "169.4 MHz"
supply = {{ voltage = "6 V" }}
switch = {{ closed_resistance = "0.18 ohm", open_resistance = "20 kohm" }}
drain = {{ capacitance = "47 pF" }}
driver = {{ duty = 0.45 }}
feed = {{ {feed}, resistance = "50 mohm" }}
[load]
resistance = "7 ohm"
[[load.ladder]]
shunt = {{ capacitance = "9 pF" }}
[[load.ladder]]
series = {{ inductance = "33 nH", q = 80 }}
[[load.ladder]]
series = {{ capacitance = "30 pF" }}
"#
    );
    Stage::parse("tests", &text).unwrap()
}

fn both_feeds() -> [Stage; 2] {
    [linear("inductance = \"8.2 nH\""), linear("choke = true")]
}

fn everything(mut stage: Stage) -> Stage {
    stage.drain_f = 5e-12;
    stage.drain_curve = Some(DrainCurve::Junction(crate::stage::Junction {
        zero_bias_f: 80e-12,
        potential_v: 0.8,
        grading: 0.5,
    }));
    stage.switch.diode = Some(Diode {
        drop_v: 0.7,
        ohm: 0.3,
    });
    stage.gate_coupling_f = 2e-12;
    stage.driver.gate = Some(Gate {
        swing_v: 3.3,
        rise_s: 2e-10,
        fall_s: 3e-10,
        charge_c: 1e-10,
    });
    stage
}

/// Integration against matrix exponentials, on a stage that only looks curved.
#[test]
fn a_straight_table_gives_the_linear_orbit() {
    for exact in both_feeds() {
        let drive = Drive::new(&exact.driver, 0.45);
        let expected = Network::new(&exact).unwrap().orbit(6.0, &drive).unwrap();
        let mut stage = exact.clone();
        stage.drain_f = 7e-12;
        stage.drain_curve = Some(DrainCurve::Table(vec![(0.0, 40e-12), (10.0, 40e-12)]));
        let orbit = Network::new(&stage).unwrap().orbit(6.0, &drive).unwrap();
        // The integrator's tolerance leaves about 1e-9.
        let close = |given: f64, expected: f64, scale: f64| {
            assert!(
                (given - expected).abs() < 1e-8 * scale,
                "{given} {expected}: {:e}",
                (given - expected).abs() / scale
            );
        };
        let size = expected.output_v.norm();
        close((orbit.output_v - expected.output_v).norm(), 0.0, size);
        close(orbit.supply_w, expected.supply_w, expected.supply_w);
        close(
            orbit.losses.closed_switch,
            expected.losses.closed_switch,
            expected.supply_w,
        );
        close(
            orbit.losses.open_switch,
            expected.losses.open_switch,
            expected.supply_w,
        );
        close(
            orbit.losses.ladder,
            expected.losses.ladder,
            expected.supply_w,
        );
        close(orbit.losses.feed, expected.losses.feed, expected.supply_w);
        close(
            orbit.losses.harmonics,
            expected.losses.harmonics,
            expected.supply_w,
        );
        close(
            orbit.switch_peak_v,
            expected.switch_peak_v,
            expected.switch_peak_v,
        );
        close(
            orbit.switch_min_v,
            expected.switch_min_v,
            expected.switch_peak_v,
        );
        close(
            orbit.switch_peak_a,
            expected.switch_peak_a,
            expected.switch_peak_a,
        );
        close(orbit.closing_v, expected.closing_v, expected.switch_peak_v);
        close(
            orbit.closing_slope_v_per_s,
            expected.closing_slope_v_per_s,
            expected.switch_peak_v * 169.4e6 * 6.3,
        );
        for (given, expected) in orbit.harmonics_dbc.iter().zip(&expected.harmonics_dbc) {
            assert!((given - expected).abs() < 1e-6, "{given} {expected}");
        }
    }
}

/// The slow way: period after period from rest.
#[test]
fn plain_settling_ends_on_the_same_orbit() {
    for stage in both_feeds().map(everything) {
        let drive = Drive::new(&stage.driver, 0.45);
        let network = Network::new(&stage).unwrap();
        let orbit = network.orbit(6.0, &drive).unwrap();
        assert!(orbit.diode_conductions > 0 || orbit.switch_min_v > -0.7);
        let twin = Curved::new(&stage).unwrap();
        let settled = twin.settled(&stage, 6.0, &drive, 250).unwrap();
        let apart = (orbit.output_v - settled.output_v).norm() / orbit.output_v.norm();
        assert!(apart < 1e-8, "{apart:e}");
        let apart = (orbit.supply_w - settled.supply_w).abs() / orbit.supply_w;
        assert!(apart < 1e-8, "{apart:e}");
    }
}

/// Without a diode or coupling the curve alone is left, and it scales: capacitance over voltage twice as wide at
/// twice the supply is the same stage in other units.
#[test]
fn voltage_scaling_is_exact() {
    let mut stage = linear("inductance = \"8.2 nH\"");
    let curve = |factor: f64| {
        DrainCurve::Junction(crate::stage::Junction {
            zero_bias_f: 100e-12,
            potential_v: 0.8 * factor,
            grading: 0.45,
        })
    };
    let drive = Drive::new(&stage.driver, 0.45);
    stage.drain_curve = Some(curve(1.0));
    let one = Network::new(&stage).unwrap().orbit(6.0, &drive).unwrap();
    stage.drain_curve = Some(curve(2.0));
    let two = Network::new(&stage).unwrap().orbit(12.0, &drive).unwrap();
    assert!((two.output_v - 2.0 * one.output_v).norm() < 1e-9 * two.output_v.norm());
    assert!((two.efficiency - one.efficiency).abs() < 1e-9);
}

/// Continuation and a cold start agree all the way down, and charge and energy balance.
#[test]
fn a_tracked_orbit_is_the_cold_one() {
    for stage in both_feeds().map(everything) {
        let network = Network::new(&stage).unwrap();
        let drive = Drive::new(&stage.driver, 0.45);
        let mut tracker = Tracker::new(&network);
        for step in (0..=12).rev() {
            let supply_v = f64::from(step) / 2.0;
            let tracked = tracker.orbit(supply_v, &drive).unwrap();
            let cold = network.orbit(supply_v, &drive).unwrap();
            let apart = (tracked.output_v - cold.output_v).norm() / cold.output_v.norm();
            assert!(apart < 1e-7, "{supply_v}: {apart:e}");
            assert!(
                tracked.charge_residual < 1e-12,
                "{:e}",
                tracked.charge_residual
            );
            assert!(
                tracked.energy_residual.abs() < 1e-6,
                "{:e}",
                tracked.energy_residual
            );
        }
    }
}

/// Near zero supply only the coupling is left: an output floor, and a phase that runs away from that at full supply.
#[test]
fn coupling_leaves_a_floor_and_turns_the_phase() {
    let mut stage = linear("inductance = \"8.2 nH\"");
    stage.gate_coupling_f = 2e-12;
    stage.driver.gate = Some(Gate {
        swing_v: 3.3,
        rise_s: 2e-10,
        fall_s: 2e-10,
        charge_c: 0.0,
    });
    let network = Network::new(&stage).unwrap();
    let drive = Drive::new(&stage.driver, 0.45);
    let mut tracker = Tracker::new(&network);
    let mut at = |supply_v: f64| tracker.orbit(supply_v, &drive).unwrap();
    let (full, none) = (at(6.0), at(0.0));
    assert!(none.output_v.norm() > 1e-3 && none.output_v.norm() < 0.2 * full.output_v.norm());
    // A fixed capacitance and no diode: still linear in supply and swing together.
    let half = at(3.0);
    let mean = 0.5 * (full.output_v + none.output_v);
    assert!((half.output_v - mean).norm() < 1e-8 * full.output_v.norm());
    let phase = |v: num_complex::Complex64| v.arg().to_degrees();
    let low = at(0.05);
    let turned = (phase(low.output_v) - phase(full.output_v)).abs();
    assert!(turned > 5.0, "{turned} deg");
    // The driver pays for what it feeds through, even where the supply gives nothing.
    assert!(none.driver_w > 0.0 && none.supply_w.abs() < 1e-12 * full.supply_w);
    assert!(none.energy_residual.abs() < 1e-6);
}

#[test]
fn edges_that_do_not_fit_are_named() {
    let mut stage = everything(linear("choke = true"));
    if let Some(gate) = &mut stage.driver.gate {
        gate.rise_s = 9e-9;
    }
    let network = Network::new(&stage).unwrap();
    let error = network
        .orbit(6.0, &Drive::new(&stage.driver, 0.45))
        .unwrap_err();
    assert!(error.to_string().contains("rise and fall"), "{error}");
}

/// A deviation shrinks over one period as the period map says: integrated sensitivities against a difference.
#[test]
fn settling_follows_the_period_map() {
    let stage = everything(linear("inductance = \"8.2 nH\""));
    let network = Network::new(&stage).unwrap();
    let drive = Drive::new(&stage.driver, 0.45);
    let settling_s = network.settling_s(&drive);
    // Loaded Q near 5: some periods, not many.
    assert!(
        settling_s > 0.3 / 169.4e6 && settling_s < 30.0 / 169.4e6,
        "{settling_s:e}"
    );
}
