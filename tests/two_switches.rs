//! Stages of several switches against the outside: SciPy's matrix exponential, and closed forms.

use std::f64::consts::{PI, TAU};

use num_complex::Complex64;
use quietedge::map::AngleSweep;
use quietedge::orbit::{Compensation, Drive, Joined, Joint, JointKind, Network, Orbit};
use quietedge::stage::Stage;
use serde_json::Value;

/// Two evaluations of the same exact formulas; peaks and slopes included, 3e-11 was seen.
const RELATIVE: f64 = 1e-9;

fn stage(text: &str) -> Stage {
    Stage::parse("stage.toml", text).unwrap_or_else(|problem| panic!("{problem}"))
}

fn pair_orbit(stage: &Stage) -> Orbit {
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    let network = Network::new(stage).unwrap_or_else(|error| panic!("{error}"));
    network
        .orbit(stage.supply_v, &drive)
        .unwrap_or_else(|error| panic!("{error}"))
}

fn joint(value: &Value) -> Joint {
    let number = |key: &str| value[key].as_f64();
    let count = |key: &str| value[key].as_u64().map(|count| count as usize);
    let kind = match value["joint"].as_str() {
        Some("floating") => JointKind::Floating,
        _ => JointKind::Tee,
    };
    Joint {
        load_ohm: number("load_ohm"),
        branch_rungs: count("branch_rungs"),
        compensation: number("reactance_ohm").map(|reactance_ohm| Compensation {
            reactance_ohm,
            q: number("q"),
            after_rungs: count("after"),
        }),
        gain_mismatch_db: number("gain_db").unwrap_or(0.0),
        phase_mismatch_rad: number("phase_deg").unwrap_or(0.0).to_radians(),
        ..Joint::new(kind)
    }
}

/// The largest relative difference between an orbit and SciPy's figures, and where.
fn difference(expected: &Value, orbit: &Orbit) -> (f64, String) {
    let mut worst = (0.0, String::new());
    let mut near = |what: String, given: f64, expected: &Value, scale: f64| {
        let expected = expected.as_f64().unwrap_or_else(|| panic!("{what}"));
        let difference = (given - expected).abs() / scale;
        if difference.is_nan() || difference > worst.0 {
            worst = (difference, format!("{what}: {given} for {expected}"));
        }
    };
    let number = |key: &str| expected[key].as_f64().unwrap_or_else(|| panic!("{key}"));
    let through = number("supply_w").abs().max(number("load_w"));
    // An output that cancels exactly is rounding on both sides.
    let load_ohm = orbit.output_v.norm_sqr() / (2.0 * orbit.output_w.max(1e-300));
    let volts = orbit
        .output_v
        .norm()
        .max(1e-3 * (through * load_ohm).sqrt());
    let output = &expected["output_v"];
    near("output re".into(), orbit.output_v.re, &output["re"], volts);
    near("output im".into(), orbit.output_v.im, &output["im"], volts);
    near(
        "supply".into(),
        orbit.supply_w,
        &expected["supply_w"],
        through,
    );
    let losses = &orbit.losses;
    let load_w = orbit.output_w + losses.harmonics;
    near("load".into(), load_w, &expected["load_w"], through);
    near("feed".into(), losses.feed, &expected["feed_w"], through);
    near(
        "ladder".into(),
        losses.ladder,
        &expected["ladder_w"],
        through,
    );
    if orbit.output_v.norm() > 1e-6 * volts {
        for (index, given) in orbit.harmonics_dbc.iter().enumerate() {
            let expected = &expected["harmonics_dbc"][index];
            // A relative error e of a harmonic moves its level by 8.7 e; its own scale is that of the output.
            let below = 10f64.powf(-expected.as_f64().unwrap() / 20.0).max(1.0);
            near(
                format!("harmonic {}", index + 2),
                *given,
                expected,
                8.7 * below,
            );
        }
    }
    let peak_v = orbit.switch_peak_v.max(-orbit.switch_min_v);
    for (index, switch) in orbit.switches.iter().enumerate() {
        let mut each = |key: &str, given: f64, scale: f64| {
            near(
                format!("{} {key}", switch.name),
                given,
                &expected[key][index],
                scale,
            );
        };
        each("peak_v", switch.peak_v, peak_v);
        each("min_v", switch.min_v, peak_v);
        each(
            "peak_a",
            switch.peak_a,
            orbit.switch_peak_a.max(-orbit.switch_min_a),
        );
        each("switch_w", switch.lost_w, through);
        each("closing_v", switch.closing_v, peak_v);
        let slope = expected["closing_slope_v_per_s"][index].as_f64().unwrap();
        each(
            "closing_slope_v_per_s",
            switch.closing_slope_v_per_s,
            slope.abs(),
        );
    }
    worst
}

#[test]
fn orbits_agree_with_scipy() {
    let document: Value =
        serde_json::from_str(include_str!("reference/two_switch.json")).expect("two_switch.json");
    let cases = document["cases"].as_array().expect("cases");
    let (mut pairs, mut angles) = (0, 0);
    let mut wrong = Vec::new();
    for case in cases {
        let name = case["name"].as_str().expect("a name");
        let stage = stage(case["toml"].as_str().expect("a stage"));
        let orbit = if case["kind"] == "pair" {
            pairs += 1;
            pair_orbit(&stage)
        } else {
            angles += 1;
            let joined = Joined::new(&stage, &joint(&case["joint"]))
                .unwrap_or_else(|error| panic!("{name}: {error}"));
            let angle_rad = case["angle_deg"].as_f64().expect("an angle").to_radians();
            joined
                .orbit(stage.supply_v, stage.driver.duty, angle_rad)
                .unwrap_or_else(|error| panic!("{name}: {error}"))
        };
        let (worst, place) = difference(&case["results"], &orbit);
        if worst.is_nan() || worst > RELATIVE {
            wrong.push(format!("{name}: {worst:.1e} at {place}"));
        }
        if orbit.energy_residual.abs() > 1e-9 {
            wrong.push(format!("{name}: balance {:.1e}", orbit.energy_residual));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
    assert!(pairs >= 6 && angles >= 20);
}

/// A pair that switches `ohm` without capacitance worth the name into a series resonant load.
fn ideal(duty: f64, ohm: f64, loaded_q: f64) -> Stage {
    let (frequency_hz, load_ohm) = (1e6, 10.0);
    let henry = loaded_q * load_ohm / (TAU * frequency_hz);
    let farad = 1.0 / (TAU * frequency_hz * loaded_q * load_ohm);
    stage(&format!(
        "frequency = {frequency_hz}
        supply = {{ voltage = 12 }}
        switch = {{ arrangement = \"pair\", closed_resistance = {ohm} }}
        drain = {{ capacitance = 1e-15 }}
        driver = {{ duty = {duty} }}
        load = {{ resistance = {load_ohm}, ladder = [{{ series = {{ inductance = {henry}, capacitance = {farad} }} }}] }}"
    ))
}

#[test]
fn the_width_law_of_ideal_voltage_switching() {
    for loaded_q in [5.0, 50.0] {
        for duty in [0.05, 0.1, 0.2, 0.35, 0.5] {
            let orbit = pair_orbit(&ideal(duty, 1e-7, loaded_q));
            // The resistance takes 1e-8 of the voltage; the parts are written with all digits.
            let law = 2.0 * 12.0 / PI * (PI * duty).sin();
            assert!(
                (orbit.output_v - law).norm() < 1e-6 * law,
                "{duty}: {} {law}",
                orbit.output_v
            );
        }
    }
}

#[test]
fn every_harmonic_of_a_rectangle_through_the_load() {
    // Both switches alike: the source is a rectangular wave behind their resistance, V_k = 2 V sin(pi k d) / (pi k).
    for (duty, ohm, loaded_q) in [(0.5, 0.4, 1.5), (0.31, 1.0, 4.0), (0.12, 0.05, 2.5)] {
        let stage = ideal(duty, ohm, loaded_q);
        let orbit = pair_orbit(&stage);
        let phasor = |order: f64| {
            let reactance = loaded_q * 10.0 * (order - 1.0 / order);
            let impedance = Complex64::new(10.0 + ohm, reactance);
            2.0 * 12.0 * (PI * order * duty).sin() / (PI * order) * 10.0 / impedance
        };
        assert!((orbit.output_v - phasor(1.0)).norm() < 1e-7 * phasor(1.0).norm());
        for (index, level) in orbit.harmonics_dbc.iter().enumerate() {
            let relative = phasor((index + 2) as f64).norm() / phasor(1.0).norm();
            let given = 10f64.powf(level / 20.0);
            // Even harmonics of a half-wave are zero: only rounding is left.
            // The node's capacitance of 1 fF behind the resistance is w R C = 6e-9 away from a rectangle.
            assert!(
                (given - relative).abs() < 1e-7,
                "{duty} {}: {given} {relative}",
                index + 2
            );
        }
        let efficiency = orbit.losses.closed_switch * 10.0 / ohm;
        // It costs C V^2 f = 144 nW as well.
        assert!((efficiency / (orbit.output_w + orbit.losses.harmonics) - 1.0).abs() < 1e-4);
    }
}

#[test]
fn a_hard_switched_capacitance_costs_its_energy() {
    // Next to no load: each period charges C from the supply and empties it, C V^2 f, whatever the resistances and
    // the dead time.
    for dead_ns in [0.0, 20.0] {
        let orbit = pair_orbit(&stage(&format!(
            "frequency = \"1 MHz\"
            supply = {{ voltage = \"20 V\" }}
            switch = {{ arrangement = \"pair\", closed_resistance = \"0.5 ohm\", upper_resistance = \"2 ohm\" }}
            drain = {{ capacitance = \"1 nF\" }}
            driver = {{ duty = 0.4, dead_time = \"{dead_ns} ns\" }}
            load = {{ resistance = \"1 Gohm\" }}"
        )));
        let law = 1e-9 * 400.0 * 1e6;
        // The load draws 160 nW.
        assert!(
            (orbit.supply_w / law - 1.0).abs() < 1e-6,
            "{}",
            orbit.supply_w
        );
        for switch in &orbit.switches {
            assert!((switch.lost_w / (0.5 * law) - 1.0).abs() < 1e-6);
            // Within the dead time the load takes a microvolt.
            assert!((switch.closing_v / 20.0 - 1.0).abs() < 1e-6);
        }
    }
}

#[test]
fn what_the_dead_time_leaves_is_switched_hard() {
    // An inductive load moves the node part of the way: each closing costs C dv^2 / 2 beside conduction, which
    // 20 microhm make small.
    let stage = stage(
        "frequency = \"1 MHz\"
        supply = { voltage = \"20 V\" }
        switch = { arrangement = \"pair\", closed_resistance = \"20 uohm\" }
        drain = { capacitance = \"1 nF\" }
        driver = { duty = 0.5, dead_time = \"15 ns\" }
        load = { resistance = \"10 ohm\", ladder = [{ series = { inductance = \"6 uH\", capacitance = \"5 nF\" } }] }",
    );
    let orbit = pair_orbit(&stage);
    let hard: f64 = orbit
        .switches
        .iter()
        .map(|switch| 0.5e-9 * switch.closing_v.powi(2) * 1e6)
        .sum();
    let conduction = 20e-6 * (orbit.output_w + orbit.losses.harmonics) / 10.0;
    assert!(
        orbit.closing_v > 3.0 && orbit.closing_v < 19.0,
        "{}",
        orbit.closing_v
    );
    // While a switch closes the load's current flows through it beside the capacitance's.
    assert!(
        (orbit.losses.closed_switch / (hard + conduction) - 1.0).abs() < 1e-3,
        "{} {hard} {conduction}",
        orbit.losses.closed_switch
    );
}

/// Two stiff branches: pairs of a small resistance behind a series resonance of high Q.
const STIFF_OHM: f64 = 0.02;

fn stiff() -> Stage {
    let mut stage = ideal(0.5, STIFF_OHM, 400.0);
    // Enough to be a circuit, and a thousandth of the switches' loss at full output.
    stage.drain_f = 3e-14;
    stage
}

/// The amplitude of the current of each branch, A, from what its two switches lose: together they carry all of it.
fn branch_a(orbit: &Orbit) -> [f64; 2] {
    [0, 2].map(|at| {
        let lost = orbit.switches[at].lost_w + orbit.switches[at + 1].lost_w;
        (2.0 * lost / STIFF_OHM).sqrt()
    })
}

#[test]
fn joined_stiff_branches_follow_the_closed_form() {
    // F. H. Raab, "Efficiency of outphasing RF power-amplifier systems", IEEE Trans. Commun., Oct. 1985 (from memory):
    // branches of constant voltage at +/- angle with a floating load R see the admittances
    // (2 cos^2 a -/+ j sin 2a) / R +/- j B; a stage whose current goes with the magnitude of that admittance has an
    // efficiency in proportion to its power factor, 2 cos^2 a / sqrt((2 cos^2 a)^2 + (sin 2a - B R)^2).
    let stage = stiff();
    let load_ohm = 20.0;
    let bare = 2.0 * stage.supply_v / PI;
    for susceptance in [0.0, 0.5, 0.8] {
        let mut joint = Joint::new(JointKind::Floating);
        if susceptance > 0.0 {
            joint.compensation = Some(Compensation {
                reactance_ohm: load_ohm / susceptance,
                q: None,
                after_rungs: None,
            });
        }
        let joined = Joined::new(&stage, &joint).unwrap();
        for degrees in [0.0f64, 10.0, 20.0, 35.0, 50.0, 65.0, 80.0] {
            let angle = degrees.to_radians();
            let orbit = joined.orbit(stage.supply_v, 0.5, angle).unwrap();
            let output = 2.0 * bare * angle.cos();
            assert!((orbit.output_v.norm() / output - 1.0).abs() < 5e-3 + 2e-3 * angle.tan());
            let conductance = 2.0 * angle.cos().powi(2);
            let reactive = (2.0 * angle).sin() - susceptance;
            let law = conductance / conductance.hypot(reactive);
            let amps = branch_a(&orbit);
            let apparent: f64 = amps.iter().map(|amp| 0.5 * bare * amp).sum();
            let found = orbit.output_w / apparent;
            assert!(
                (found / law - 1.0).abs() < 5e-3,
                "B R = {susceptance}, {degrees} deg: {found} for {law}"
            );
            // The switches' own loss in closed form.
            let amp = bare * conductance.hypot(reactive) / load_ohm;
            let efficiency = 1.0 / (1.0 + STIFF_OHM * amp * amp / orbit.output_w);
            assert!((orbit.efficiency / efficiency - 1.0).abs() < 5e-3);
        }
    }
}

#[test]
fn the_sign_of_the_angle_exchanges_like_branches() {
    let text = include_str!("../signals/tide-gauge.stage.toml");
    let stage = stage(text);
    let joined = Joined::new(&stage, &Joint::new(JointKind::Floating)).unwrap();
    for degrees in [5.0f64, 30.0, 77.0, 120.0] {
        let [ahead, behind] = [1.0, -1.0].map(|sign| {
            joined
                .orbit(stage.supply_v, 0.5, sign * degrees.to_radians())
                .unwrap()
        });
        let near = |a: f64, b: f64| (a - b).abs() < 1e-9 * a.abs();
        assert!(near(ahead.output_w, behind.output_w));
        assert!(near(ahead.supply_w, behind.supply_w));
        assert!(near(ahead.switches[0].peak_v, behind.switches[1].peak_v));
        assert!(near(ahead.switches[1].peak_a, behind.switches[0].peak_a));
        // Compensated branches are not alike any more.
        let mut joint = Joint::new(JointKind::Floating);
        joint.compensation = Some(Compensation {
            reactance_ohm: 100.0,
            q: None,
            after_rungs: None,
        });
        let other = Joined::new(&stage, &joint).unwrap();
        let [ahead, behind] = [1.0, -1.0].map(|sign| {
            other
                .orbit(stage.supply_v, 0.5, sign * degrees.to_radians())
                .unwrap()
        });
        assert!(!near(ahead.output_w, behind.output_w));
    }
}

#[test]
fn energy_is_kept_at_every_angle() {
    let tide = stage(include_str!("../signals/tide-gauge.stage.toml"));
    let buoy = stage(include_str!("../signals/buoy.stage.toml"));
    let tee = Joint {
        branch_rungs: Some(2),
        ..Joint::new(JointKind::Tee)
    };
    for (stage, joint) in [
        (&tide, Joint::new(JointKind::Floating)),
        (&tide, tee),
        (&buoy, Joint::new(JointKind::Floating)),
        (&buoy, tee),
    ] {
        let joined = Joined::new(stage, &joint).unwrap();
        for degrees in (-180..180).step_by(9) {
            let angle = f64::from(degrees).to_radians();
            let orbit = joined.orbit(stage.supply_v, 0.5, angle).unwrap();
            assert!(
                orbit.energy_residual.abs() < 1e-9,
                "{} at {degrees} deg: {:.1e}",
                stage.title,
                orbit.energy_residual
            );
        }
    }
}

#[test]
fn the_map_between_its_angles_is_the_orbit() {
    let stage = stage(include_str!("../signals/tide-gauge.stage.toml"));
    let joined = Joined::new(&stage, &Joint::new(JointKind::Floating)).unwrap();
    let map = AngleSweep::full(&joined, 721)
        .unwrap()
        .solve(&joined)
        .unwrap();
    for step in 0..40 {
        let angle = (-89.9 + 4.47 * f64::from(step)).to_radians();
        let orbit = joined.orbit(stage.supply_v, 0.5, angle).unwrap();
        // A quarter of a degree apart, the monotone cubic bends by at most h^2 / 8 = 2e-6 at a summit.
        let (found, held) = map.output_held_v(angle);
        assert!(!held);
        assert!(
            (found - orbit.output_v).norm() < 3e-6 * map.full_amplitude_v(),
            "{angle}: {found} {}",
            orbit.output_v
        );
    }
}

/// `quietedge check` of the joined demo with `change` made to its text.
fn check(name: &str, change: impl Fn(&str) -> String, more: &[&str]) -> std::process::Output {
    let signals = concat!(env!("CARGO_MANIFEST_DIR"), "/signals");
    let text = include_str!("../signals/buoy-joined.study.toml")
        .replace("buoy.stage.toml", &format!("{signals}/buoy.stage.toml"))
        .replace("tide-gauge.wav", &format!("{signals}/tide-gauge.wav"));
    let path = format!("{}/{name}.study.toml", env!("CARGO_TARGET_TMPDIR"));
    std::fs::write(&path, change(&text)).unwrap();
    std::process::Command::new(env!("CARGO_BIN_EXE_quietedge"))
        .args(["check", &path, "--json"])
        .args(more)
        .output()
        .unwrap()
}

fn document(output: &std::process::Output) -> Value {
    serde_json::from_slice(&output.stdout)
        .unwrap_or_else(|error| panic!("{error}: {}", String::from_utf8_lossy(&output.stderr)))
}

#[test]
fn a_joined_study_is_checked() {
    let like = |text: &str| -> String {
        let keep = |line: &&str| !line.starts_with("mismatch") && !line.starts_with("branch_band");
        text.lines()
            .filter(keep)
            .map(|line| format!("{line}\n"))
            .collect()
    };
    let evm = |output: &std::process::Output| {
        document(output)["metrics"]["evm_percent"]
            .as_f64()
            .expect("an EVM")
    };
    // Like branches by the inverse map give the signal; by the cosine what bends the map is left.
    let inverse = check("joined-inverse", like, &[]);
    assert!(evm(&inverse) < 1e-3, "{}", evm(&inverse));
    let cosine = |text: &str| like(text).replace("joint =", "law = \"cosine\"\njoint =");
    let cosine = evm(&check("joined-cosine", cosine, &[]));
    assert!((0.3..0.7).contains(&cosine), "{cosine}");
    // As the demo stands: unlike branches of limited bandwidth.
    let demo = check("joined-demo", str::to_owned, &[]);
    assert_eq!(demo.status.code(), Some(0));
    let found = evm(&demo);
    assert!(found > 0.02 && found < cosine, "{found}");
    let warnings = document(&demo)["warnings"].to_string();
    assert!(warnings.contains("body diode"), "{warnings}");
    // Joined stages are not replayed, and say so.
    let replay = check("joined-replay", str::to_owned, &["--by", "replay"]);
    assert_eq!(replay.status.code(), Some(2));
    let message = String::from_utf8_lossy(&replay.stderr);
    assert!(message.contains("joined"), "{message}");
}
