//! The bank of curved stages of `tests/reference/curved.json` against a twin that settles in time.

use std::io::{self, Cursor};

use quietedge::input::{Files, ReadSeek};
use quietedge::orbit::{Drive, Network, OrbitError};
use quietedge::stage::{Feed, Stage};
use serde_json::Value;

use super::curved_twin::{closings, curved_twin};

/// What two step sizes, extrapolated, leave: the twin has order 2 and no events, so that the diode's corner and
/// the charge dumped at closing fall between its steps. SciPy's shooting holds the same stages to 1e-6.
const SETTLED: f64 = 2e-4;

/// The same for the lowest and highest drain voltage, which the twin reads at its steps only.
const EXTREME: f64 = 1e-3;

/// Of a period's charge, relative to what moves on and off the drain.
const CHARGE: f64 = 1e-12;

struct Tables(Value);

impl Files for Tables {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        let text = self.0[name].as_str().ok_or(io::ErrorKind::NotFound)?;
        Ok(Box::new(Cursor::new(text.to_owned())))
    }
}

#[test]
fn the_curved_twin_settles_to_the_orbit() {
    let text = include_str!("../reference/curved.json");
    let document: Value = serde_json::from_str(text).expect("curved.json");
    let stages = document["stages"].as_array().expect("stages");
    assert!(stages.len() >= 34);
    let (mut worst, mut faults) = ((0.0, String::new()), Vec::new());
    let mut worst_charge = 0.0f64;
    for entry in stages {
        let name = entry["name"].as_str().expect("a name");
        let toml = entry["toml"].as_str().expect("a stage file");
        let stage = Stage::read(name, toml, &Tables(entry["tables"].clone()))
            .unwrap_or_else(|problem| panic!("{problem}"));
        let network = Network::new(&stage).unwrap_or_else(|error| panic!("{name}: {error}"));
        let drive = Drive::new(&stage.driver, stage.driver.duty);
        let orbit = network
            .orbit(stage.supply_v, &drive)
            .unwrap_or_else(|error| panic!("{name}: {error}"));
        worst_charge = worst_charge.max(orbit.charge_residual);
        assert!(
            orbit.charge_residual <= CHARGE,
            "{name}: {}",
            orbit.charge_residual
        );
        let twin = curved_twin(&stage, stage.supply_v, orbit.supply_a, &drive);
        let amplitude = orbit.output_v.norm();
        let power = orbit.supply_w.abs() + orbit.driver_w;
        let losses = &orbit.losses;
        let peak = orbit.switch_peak_v;
        let mut pairs = vec![
            ("output re", orbit.output_v.re, twin.output_v.re, amplitude),
            ("output im", orbit.output_v.im, twin.output_v.im, amplitude),
            (
                "load power",
                orbit.output_w + losses.harmonics,
                twin.load_w,
                power,
            ),
            (
                "switch loss",
                losses.closed_switch + losses.open_switch,
                twin.switch_w,
                power,
            ),
            ("diode loss", losses.diode, twin.diode_w, power),
            ("peak voltage", peak, twin.switch_peak_v, peak),
            (
                "lowest voltage",
                orbit.switch_min_v,
                twin.switch_min_v,
                peak,
            ),
            ("closing voltage", orbit.closing_v, twin.closing_v, peak),
        ];
        match stage.feed {
            Feed::Inductor { .. } | Feed::Direct => {
                pairs.push((
                    "supply power",
                    orbit.supply_w,
                    twin.supply_a * stage.supply_v,
                    power,
                ));
            }
            // The twin was given the current: its mean drain voltage must be what the supply leaves.
            Feed::Choke { ohm } => {
                let left_v = stage.supply_v - ohm * orbit.supply_a;
                pairs.push(("mean drain voltage", left_v, twin.drain_v, stage.supply_v));
            }
        }
        for (what, given, expected, scale) in pairs {
            let error = (given - expected).abs() / scale.abs();
            let allowed = match what {
                "peak voltage" | "lowest voltage" => EXTREME,
                _ => SETTLED,
            };
            if error.is_nan() || error > allowed {
                faults.push(format!(
                    "{name}: {what} {given} against {expected}: {error:.1e}"
                ));
            }
            if error > worst.0 {
                worst = (error, format!("{name}: {what}"));
            }
        }
    }
    println!(
        "curved twin: {} stages settled, worst difference {:.1e} ({}); charge left over {worst_charge:.1e}",
        stages.len(),
        worst.0,
        worst.1
    );
    assert!(faults.is_empty(), "{}", faults.join("\n"));
}

/// A large junction on a small coil: from 2 to 3 V of supply on, its orbit of one period is no longer stable.
const SUBHARMONIC: &str = r#"
frequency = "169.4 MHz"
supply = { voltage = 4 }
switch = { closed_resistance = 0.005595631578712327, diode = { drop = 4.093879833365655, resistance = 0.3 } }
driver = { duty = 0.29659521403892947, swing = 3, rise = 0.0000000009300159548361479, fall = 0.0000000002 }
feed = { inductance = 0.00000001, resistance = 0.05 }
[drain]
capacitance = 0.00000000002
junction = { zero_bias = 0.0000003784997262944971, potential = 0.2766678912017115, grading = 2.129449934311377 }
gate_coupling = 0.000000000002
[load]
resistance = 6.925869994737929
[[load.ladder]]
series = { inductance = 0.00000003, q = 143.88517413495987 }
[[load.ladder]]
series = { inductance = 0.0000015994435491668928 }
"#;

#[test]
fn an_orbit_that_the_twin_never_settles_to_is_called_unstable() {
    let stage = Stage::parse("subharmonic", SUBHARMONIC).expect("a stage");
    let network = Network::new(&stage).expect("a network");
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    match network.orbit(4.0, &drive) {
        Err(error @ OrbitError::Unstable { re, im }) => {
            assert!(re < -1.5 && im == 0.0, "{re} {im}");
            assert!(error.to_string().contains("two carrier cycles"), "{error}");
        }
        other => panic!("{other:?}"),
    }
    let moved = |supply_v: f64| {
        let last = closings(&stage, supply_v, &drive, 3000);
        let size = last.iter().fold(1e-3f64, |size, volt| size.max(volt.abs()));
        (last[3] - last[2]).abs() / size
    };
    // Where it is stable, the twin comes to the same closing voltage each period; here it does not.
    let (stable, unstable) = (moved(1.0), moved(4.0));
    println!("closing voltage from period to period: {stable:.1e} at 1 V, {unstable:.1e} at 4 V");
    assert!(network.orbit(1.0, &drive).is_ok());
    assert!(stable < 1e-4 && unstable > 1e-2, "{stable} {unstable}");
}
