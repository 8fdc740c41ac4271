//! Published design polynomials against stages that are solved for zero voltage and zero slope at closing. The
//! coefficients were recalled from memory.

use std::f64::consts::TAU;

use quietedge::orbit::{Drive, Network, Orbit};
use quietedge::stage::{
    Anchor, Arm, Arrangement, Driver, Element, Feed, Load, Part, Rung, Stage, Switch,
};

const HERTZ: f64 = 1e6;

/// One volt of supply, one ohm of load, half duty, an almost lossless switch; `parts` are `w L R`-normalised:
/// drain capacitance, series capacitance, series inductance, feed.
fn stage(drain: f64, series_c: f64, series_l: f64, feed: Option<f64>) -> Stage {
    let angular_hz = TAU * HERTZ;
    let rung = |element| Rung {
        arm: Arm::Series,
        parts: vec![Part {
            element,
            loss_ohm: 0.0,
        }],
    };
    Stage {
        title: "polynomials".into(),
        frequency_hz: HERTZ,
        supply_v: 1.0,
        switch: Switch {
            closed_ohm: 1e-5,
            open_ohm: f64::INFINITY,
            knee: None,
            diode: None,
            arrangement: Arrangement::Single,
        },
        drain_f: drain / angular_hz,
        drain_curve: None,
        gate_coupling_f: 0.0,
        driver: Driver {
            duty: 0.5,
            anchor: Anchor::Centre,
            gate: None,
            dead_s: 0.0,
        },
        feed: feed.map_or(Feed::Choke { ohm: 0.0 }, |ohm| Feed::Inductor {
            henry: ohm / angular_hz,
            ohm: 0.0,
        }),
        ladder: vec![
            rung(Element::Inductor(series_l / angular_hz)),
            rung(Element::Capacitor(series_c / angular_hz)),
        ],
        load: Load::matched(1.0),
    }
}

fn orbit(stage: &Stage) -> Orbit {
    let network = Network::new(stage).expect("a network");
    let drive = Drive::new(&stage.driver, 0.5);
    network.orbit(1.0, &drive).expect("an orbit")
}

/// Drain and series capacitance of zero voltage and zero slope at closing, by Newton's method with differences.
fn soft(start: [f64; 2], series_l: f64, feed: Option<f64>) -> ([f64; 2], Orbit) {
    let misses = |x: [f64; 2]| {
        let orbit = orbit(&stage(x[0], x[1], series_l, feed));
        [orbit.closing_v, orbit.closing_slope_v_per_s / (TAU * HERTZ)]
    };
    let mut x = start;
    for _ in 0..60 {
        let here = misses(x);
        let columns: Vec<[f64; 2]> = (0..2)
            .map(|column| {
                let mut moved = x;
                let nudge = 1e-6 * x[column];
                moved[column] += nudge;
                let there = misses(moved);
                [(there[0] - here[0]) / nudge, (there[1] - here[1]) / nudge]
            })
            .collect();
        let (a, b, c, d) = (columns[0][0], columns[1][0], columns[0][1], columns[1][1]);
        let determinant = a * d - b * c;
        let step = [
            (d * here[0] - b * here[1]) / determinant,
            (a * here[1] - c * here[0]) / determinant,
        ];
        // Not more than a fifth at once.
        let damping = (0.2 * x[0] / step[0].abs())
            .min(0.2 * x[1] / step[1].abs())
            .min(1.0);
        x = [x[0] - damping * step[0], x[1] - damping * step[1]];
        if step[0].abs() < 1e-9 * x[0] && step[1].abs() < 1e-9 * x[1] {
            let orbit = orbit(&stage(x[0], x[1], series_l, feed));
            return (x, orbit);
        }
    }
    panic!("no soft closing at {series_l}: {x:?}");
}

#[test]
fn finite_loaded_q_is_sokals() {
    // N. O. Sokal, "Class-E RF power amplifiers", QEX, Jan./Feb. 2001, with an ideal choke and without saturation
    // voltage; QL = w L2 / R, from 1.7879 upwards. The polynomials were fitted to tabulated solutions and are stated
    // there to hold these within 0.15 % (power), 0.13 % (C1), 0.072 % (C2).
    let mut worst = [0.0f64; 3];
    for q in [2.0, 2.5, 3.0, 4.0, 5.0, 7.0, 10.0, 20.0, 50.0] {
        let power = 0.576_801 * (1.001_245 - 0.451_759 / q - 0.402_444 / (q * q));
        let drain = TAU / 34.2219 * (0.998_66 + 0.914_24 / q - 1.031_75 / (q * q));
        let series = (1.001_21 + 1.014_68 / (q - 1.7879)) / (q - 0.104_823);
        let ([c1, c2], orbit) = soft([drain, series], q, None);
        let apart = [
            orbit.output_w + orbit.losses.harmonics - power,
            c1 - drain,
            c2 - series,
        ];
        let apart = [apart[0] / power, apart[1] / drain, apart[2] / series];
        println!(
            "QL {q}: P {:+.3} % (fundamental alone {:+.3} %), C1 {:+.3} %, C2 {:+.3} %",
            100.0 * apart[0],
            100.0 * (orbit.output_w / power - 1.0),
            100.0 * apart[1],
            100.0 * apart[2]
        );
        for (worst, apart) in worst.iter_mut().zip(apart) {
            *worst = worst.max(apart.abs());
        }
    }
    println!(
        "worst: P {:.1e}, C1 {:.1e}, C2 {:.1e}",
        worst[0], worst[1], worst[2]
    );
    assert!(worst.iter().all(|worst| *worst < SOKAL), "{worst:?}");
}

/// Between the polynomials and the solved stages, relative.
const SOKAL: f64 = 3e-3;

#[test]
fn fits_of_the_feed_ratio_are_acars() {
    // Fits to K(q, 1/2) for q = 1/(w sqrt(L C)) from 1 to 1.65: M. Acar, A. J. Annema, B. Nauta, IEEE Trans.
    // Circuits Syst. I, Dec. 2007. Against the ideal equations as `closed_forms.json` holds them.
    let text = include_str!("reference/closed_forms.json");
    let document: serde_json::Value = serde_json::from_str(text).expect("closed_forms.json");
    let designs = document["figures"]["any_feed"].as_array().expect("designs");
    let mut held = 0;
    let mut worst = [0.0f64; 4];
    for design in designs {
        let number = |key: &str| design[key].as_f64().expect("a number");
        let q = number("q");
        if number("duty") != 0.5 || !(1.0..=1.65).contains(&q) {
            continue;
        }
        let cubic = |c: [f64; 4]| ((c[0] * q + c[1]) * q + c[2]) * q + c[3];
        let fits = [
            ("wl_over_r", cubic([0.0, 8.085, -24.53, 19.23])),
            ("wrc", cubic([-6.97, 25.93, -31.071, 12.48])),
            ("power", cubic([-11.90, 42.753, -49.63, 19.70])),
            ("excess", cubic([-2.9, 8.8, -10.2, 5.02])),
        ];
        for ((key, fit), worst) in fits.into_iter().zip(&mut worst) {
            let apart = fit - number(key);
            println!(
                "q {q}: {key} fit {fit:.4}, exact {:.4}, apart {apart:+.4}",
                number(key)
            );
            *worst = worst.max(apart.abs());
        }
        held += 1;
    }
    println!("{held} ratios, worst {worst:?}");
    assert!(held >= 4);
    assert!(worst.iter().all(|worst| *worst < ACAR), "{worst:?}");
}

/// Between the fits and the ideal equations, absolute: the printed coefficients of a cubic over a whole unit of q.
const ACAR: f64 = 0.08;
