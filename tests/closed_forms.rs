//! Class E closed forms from the literature against the solver with a nearly ideal stage.
//!
//! The ideal equations know no series resonator: their output current is a sine. The solver is given loaded
//! Qs of 100, 200, 400 and 800, and its figures are extrapolated to an infinite one. The design numbers are those
//! of `tests/reference/closed_forms.py` (SciPy 1.17.1 on the ideal equations; it holds them against F. H. Raab,
//! IEEE Trans. Circuits Syst., Dec. 1977, and A. Grebennikov, High Frequency Electronics, July 2004).

use std::f64::consts::{FRAC_PI_2, PI, TAU};

use quietedge::map::{Control, Sweep};
use quietedge::orbit::{Drive, Network};
use quietedge::stage::{
    Anchor, Arm, Arrangement, Driver, Element, Feed, Load, Part, Rung, Stage, Switch,
};
use serde_json::Value;

/// Asked for: four digits, 1e-4. What the extrapolation leaves is smaller: 7e-7 over all designs, of which the
/// closed resistance of 1e-7 of the load costs some 2e-7.
const FOUR_DIGITS: f64 = 5e-6;

const LOADED_Q: [f64; 4] = [100.0, 200.0, 400.0, 800.0];

/// A design in units of the load resistance (1 ohm) and the supply (1 V).
#[derive(Debug, Clone, Copy)]
struct Design {
    duty: f64,
    /// w L / R of the feed; an ideal choke where absent.
    feed: Option<f64>,
    wrc: f64,
    excess: f64,
}

impl Design {
    fn of(figures: &Value, duty: f64) -> Self {
        Self {
            duty,
            feed: figures["wl_over_r"].as_f64(),
            wrc: number(figures, "wrc"),
            excess: number(figures, "excess"),
        }
    }

    fn stage(&self, loaded_q: f64, closed_ohm: f64) -> Stage {
        let angular_hz = TAU * 1e6;
        let part = |element| Part {
            element,
            loss_ohm: 0.0,
        };
        Stage {
            title: "nearly ideal".into(),
            frequency_hz: 1e6,
            supply_v: 1.0,
            switch: Switch {
                closed_ohm,
                open_ohm: f64::INFINITY,
                knee: None,
                diode: None,
                arrangement: Arrangement::Single,
            },
            drain_f: self.wrc / angular_hz,
            drain_curve: None,
            gate_coupling_f: 0.0,
            driver: Driver {
                duty: self.duty,
                anchor: Anchor::Centre,
                gate: None,
                dead_s: 0.0,
            },
            feed: self
                .feed
                .map_or(Feed::Choke { ohm: 0.0 }, |ohm| Feed::Inductor {
                    henry: ohm / angular_hz,
                    ohm: 0.0,
                }),
            ladder: vec![Rung {
                arm: Arm::Series,
                parts: vec![
                    part(Element::Inductor((loaded_q + self.excess) / angular_hz)),
                    part(Element::Capacitor(1.0 / (angular_hz * loaded_q))),
                ],
            }],
            load: Load::matched(1.0),
        }
    }
}

fn number(figures: &Value, key: &str) -> f64 {
    figures[key]
        .as_f64()
        .unwrap_or_else(|| panic!("{key} of {figures}"))
}

fn stored() -> Value {
    let text = include_str!("reference/closed_forms.json");
    let document: Value = serde_json::from_str(text).expect("closed_forms.json");
    document["figures"].clone()
}

/// What the solver finds, by name, each extrapolated to an infinite loaded Q.
fn found(design: &Design) -> Vec<(&'static str, f64)> {
    // What makes the current a sine is a branch of high impedance beside the drain capacitance, not the load alone.
    let least = (0.2 / design.wrc).max(1.0);
    let at_q: Vec<_> = LOADED_Q.iter().map(|&q| at(design, least * q)).collect();
    (0..at_q[0].len())
        .map(|index| {
            let points: Vec<_> = LOADED_Q
                .iter()
                .zip(&at_q)
                .map(|(q, figures)| (1.0 / q, figures[index].1))
                .collect();
            (at_q[0][index].0, at_zero(&points))
        })
        .collect()
}

/// The figures at one loaded Q, named as in the stored file.
fn at(design: &Design, loaded_q: f64) -> Vec<(&'static str, f64)> {
    let stage = design.stage(loaded_q, 1e-7);
    let network = Network::new(&stage).expect("a network");
    let drive = Drive::new(&stage.driver, design.duty);
    let orbit = network.orbit(1.0, &drive).expect("an orbit");
    assert!(
        orbit.energy_residual.abs() < 1e-9,
        "{design:?}, Q {loaded_q}: {:e}",
        orbit.energy_residual
    );
    // At a finite Q the switch closes on a small voltage, whose discharge tops every other current. It lasts
    // 1e-7 rad; the ideal peak is read from the waveform behind it.
    let waveform = network.waveform(1.0, &drive, 2001).expect("a waveform");
    let currents = &waveform.switch_a[1..2001];
    // Load voltage `I R sin(theta + phi)`, theta from the closing instant: phi = arg + pi/2 - pi duty.
    let phi = orbit.output_v.arg() + FRAC_PI_2 - PI * design.duty;
    vec![
        ("power", orbit.output_w),
        ("mean_a", orbit.supply_a),
        ("current", orbit.output_v.norm()),
        ("peak_v", orbit.switch_peak_v),
        ("peak_a", peak(currents) / orbit.supply_a),
        ("closing_v", orbit.closing_v),
        (
            "closing slope per rad",
            orbit.closing_slope_v_per_s / (TAU * 1e6),
        ),
        ("phi cos", phi.cos()),
        ("phi sin", phi.sin()),
    ]
}

/// The largest value of an evenly sampled smooth curve: the parabola through the largest sample and its neighbours.
fn peak(samples: &[f64]) -> f64 {
    let top = (0..samples.len())
        .max_by(|&a, &b| samples[a].total_cmp(&samples[b]))
        .expect("samples");
    if top == 0 || top + 1 == samples.len() {
        return samples[top];
    }
    let (left, middle, right) = (samples[top - 1], samples[top], samples[top + 1]);
    let bend = left - 2.0 * middle + right;
    middle - (right - left).powi(2) / (8.0 * bend)
}

/// The value at zero of the polynomial through `points` (Neville; Richardson's deferred approach to the limit).
fn at_zero(points: &[(f64, f64)]) -> f64 {
    let mut values: Vec<f64> = points.iter().map(|point| point.1).collect();
    for order in 1..points.len() {
        for i in 0..points.len() - order {
            let (near, far) = (points[i + order].0, points[i].0);
            values[i] = (far * values[i + 1] - near * values[i]) / (far - near);
        }
    }
    values[0]
}

/// Holds the extrapolated figures against the stored ones; returns the largest relative difference.
fn hold(name: &str, design: &Design, figures: &Value) -> f64 {
    let mut worst = 0.0f64;
    let phi = number(figures, "phi_rad");
    for (key, found) in found(design) {
        let (expected, scale) = match key {
            // Zero voltage and zero slope at closing, on the scale of the supply.
            "closing_v" | "closing slope per rad" => (0.0, 1.0),
            "phi cos" => (phi.cos(), 1.0),
            "phi sin" => (phi.sin(), 1.0),
            _ => (number(figures, key), number(figures, key)),
        };
        let error = (found - expected).abs() / scale;
        assert!(
            error < FOUR_DIGITS,
            "{name}: {key} {found} against {expected}: {error:.1e}"
        );
        worst = worst.max(error);
    }
    worst
}

#[test]
fn choke_at_duty_one_half_is_raabs() {
    let figures = stored()["choke_half"].clone();
    let closed = 8.0 / (PI * PI + 4.0);
    assert!((number(&figures, "power") - closed).abs() < 1e-9);
    assert!((number(&figures, "wrc") - closed / PI).abs() < 1e-9);
    assert!((number(&figures, "excess") - PI * (PI * PI - 4.0) / 16.0).abs() < 1e-9);
    let design = Design::of(&figures, 0.5);
    let worst = hold("choke, duty 0.5", &design, &figures);
    println!("choke at duty 0.5: largest difference {worst:.1e}");
    // The printed digits of Raab, 1977.
    for (key, value, digit) in [
        ("power", 0.5768, 1e-4),
        ("peak_v", 3.562, 1e-3),
        ("peak_a", 2.862, 1e-3),
    ] {
        let found = found(&design)
            .into_iter()
            .find(|(name, _)| *name == key)
            .expect("a figure")
            .1;
        assert!((found - value).abs() < digit, "{key}: {found} {value}");
    }
}

#[test]
fn choke_at_other_duties() {
    let mut worst = 0.0f64;
    for figures in stored()["choke"].as_array().expect("duties") {
        let duty = number(figures, "duty");
        worst = worst.max(hold(
            &format!("choke, duty {duty}"),
            &Design::of(figures, duty),
            figures,
        ));
    }
    println!("choke at duties 0.25 to 0.75: largest difference {worst:.1e}");
}

#[test]
fn finite_feed_without_excess_reactance() {
    let figures = stored()["no_excess_reactance"].clone();
    let design = Design::of(&figures, 0.5);
    let worst = hold("no excess reactance", &design, &figures);
    println!("finite feed without excess reactance: largest difference {worst:.1e}");
    // The printed digits of Grebennikov, 2004.
    for (key, value, digit) in [("peak_v", 3.647, 1e-3), ("peak_a", 2.647, 1e-3)] {
        let found = found(&design)
            .into_iter()
            .find(|(name, _)| *name == key)
            .expect("a figure")
            .1;
        assert!((found - value).abs() < digit, "{key}: {found} {value}");
    }
}

#[test]
fn any_feed_and_duty() {
    // The design set K(q, d) of M. Acar, A. J. Annema, B. Nauta, IEEE Trans. Circuits Syst. I, Dec. 2007, as the
    // stored file computes it; designs whose switch would carry negative voltages or currents included.
    let (mut worst, mut held) = (0.0f64, 0);
    for figures in stored()["any_feed"].as_array().expect("designs") {
        let (q, duty) = (number(figures, "q"), number(figures, "duty"));
        worst = worst.max(hold(
            &format!("q {q}, duty {duty}"),
            &Design::of(figures, duty),
            figures,
        ));
        held += 1;
    }
    assert!(held >= 60, "{held}");
    println!("{held} designs K(q, d): largest difference {worst:.1e}");
}

#[test]
fn loss_in_the_closed_resistance() {
    // Efficiency 1 / (1 + k Ron/R), k = 1.365 (Raab and Sokal, 1978, first order in Ron); the ideal equations
    // give k = 1.3652. At Q 3000 the switching loss, of order 1/Q^2, is below 1e-4 of the smallest loss used.
    let figures = stored()["choke_half"].clone();
    let design = Design::of(&figures, 0.5);
    let points: Vec<(f64, f64)> = [4e-3, 2e-3, 1e-3, 5e-4]
        .iter()
        .map(|&closed_ohm| {
            let stage = design.stage(3000.0, closed_ohm);
            let network = Network::new(&stage).expect("a network");
            let drive = Drive::new(&stage.driver, 0.5);
            let orbit = network.orbit(1.0, &drive).expect("an orbit");
            (closed_ohm, (1.0 / orbit.efficiency - 1.0) / closed_ohm)
        })
        .collect();
    let slope = at_zero(&points);
    let expected = number(&figures, "closed_resistance_loss");
    println!("closed resistance: k = {slope:.5}, ideal equations {expected:.5}");
    assert!((slope - expected).abs() < 1e-3, "{slope} {expected}");
    assert!((slope - 1.365).abs() < 2e-3);
}

#[test]
fn supply_map_of_a_linear_stage_is_straight() {
    let text = include_str!("../signals/tide-gauge.stage.toml");
    let stage = Stage::parse("tide-gauge.stage.toml", text).expect("a stage");
    let network = Network::new(&stage).expect("a network");
    let map = Sweep::full(&network, Control::Supply, 201)
        .and_then(|sweep| sweep.solve(&network))
        .expect("a map");
    let full = map.points()[200].output_v;
    for point in map.points() {
        let straight = full * (point.control / stage.supply_v);
        assert!((point.output_v - straight).norm() <= 1e-12 * full.norm());
    }
    for step in 0..=1000 {
        // Between the points too: the curve through a straight line is straight.
        let control = stage.supply_v * f64::from(step) / 1000.0;
        let output = map.output_v(control).expect("inside");
        let straight = full * (control / stage.supply_v);
        assert!(
            (output - straight).norm() <= 1e-12 * full.norm(),
            "{control}"
        );
        let phase = map.phase_at_rad(control).expect("inside");
        assert!((phase - full.arg()).abs() < 1e-12, "{control}: {phase}");
    }
}
