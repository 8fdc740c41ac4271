//! A long search for stages that break the reader or the solver, run by hand:
//!
//! ```sh
//! SEARCH_SECONDS=600 SEARCH_LOG=found.txt cargo test --release --test search -- --ignored --nocapture
//! ```
//!
//! Ranges are far wider than any hardware. What counts as broken: a panic, an orbit that does not balance or is not
//! finite, a stable orbit that is none, a solve that takes longer than its work limit should allow. Every find goes
//! to the log with the text that made it; those that were real became tests or files in `tests/bad`.

use std::fmt::Write as _;
use std::io::Write as _;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::time::{Duration, Instant};

use proptest::prelude::*;
use proptest::strategy::ValueTree;
use proptest::test_runner::{Config, RngAlgorithm, TestRng, TestRunner};
use quietedge::design::{Choice, PartLosses, Targets, design};
use quietedge::map::{Control, LoadSweep, Sweep};
use quietedge::orbit::{Drive, Network};
use quietedge::stage::{Arrangement, Device, Diode, DrainCurve, Junction, Stage, Switch};

/// A try that computes for longer is written down: about twenty orbits are asked for, of at most a second each.
const SLOW: Duration = Duration::from_secs(20);

/// Time on a processor, which other work does not lengthen; on systems that do not tell it, time on the clock.
fn spent(begin: Instant) -> Duration {
    std::fs::read_to_string("/proc/thread-self/schedstat")
        .ok()
        .and_then(|text| text.split(' ').next()?.parse().ok())
        .map_or_else(|| begin.elapsed(), Duration::from_nanos)
}

fn around(middle: f64, decades: f64) -> impl Strategy<Value = f64> {
    (-decades..decades).prop_map(move |power| middle * 10f64.powf(power))
}

fn maybe(text: impl Strategy<Value = String> + 'static) -> BoxedStrategy<String> {
    prop_oneof![Just(String::new()), text].boxed()
}

fn device() -> impl Strategy<Value = (String, String, String)> {
    let diode = (0.0..20.0f64, around(0.3, 6.0))
        .prop_map(|(drop, ohm)| format!("diode = {{ drop = {drop}, resistance = {ohm} }}\n"));
    let knee = (around(2.0, 5.0), 2.0..20.0f64)
        .prop_map(|(amp, k)| format!("knee = {{ current = {amp}, sharpness = {k} }}\n"));
    let junction = (around(80e-12, 6.0), 0.05..10.0f64, 0.01..3.0f64).prop_map(|(c, phi, m)| {
        format!("junction = {{ zero_bias = {c}, potential = {phi}, grading = {m} }}\n")
    });
    let fixed = around(20e-12, 6.0).prop_map(|c| format!("capacitance = {c}\n"));
    let coupling = (
        around(2e-12, 4.0),
        around(3.0, 2.0),
        around(2e-10, 3.0),
        around(2e-10, 3.0),
    );
    let coupled = prop_oneof![
        Just((String::new(), String::new())),
        coupling.prop_map(|(c, swing, rise, fall)| (
            format!("gate_coupling = {c}\n"),
            format!("swing = {swing}\nrise = {rise}\nfall = {fall}\n")
        ))
    ];
    (maybe(diode), maybe(knee), maybe(junction), fixed, coupled).prop_map(
        |(diode, knee, junction, fixed, (coupling, gate))| {
            (diode + &knee, fixed + &junction + &coupling, gate)
        },
    )
}

fn ladder() -> impl Strategy<Value = String> {
    let part = prop_oneof![
        around(30e-9, 5.0).prop_map(|l| format!("inductance = {l}")),
        around(30e-12, 5.0).prop_map(|c| format!("capacitance = {c}")),
        around(5.0, 5.0).prop_map(|r| format!("resistance = {r}")),
        (around(30e-9, 4.0), around(50.0, 4.0))
            .prop_map(|(l, q)| format!("inductance = {l}, q = {q}")),
        (around(30e-9, 4.0), around(30e-12, 4.0))
            .prop_map(|(l, c)| format!("inductance = {l}, capacitance = {c}")),
    ];
    let tank = (around(30e-9, 4.0), around(30e-12, 4.0)).prop_map(|(l, c)| {
        format!("[[load.ladder]]\ntank = {{ inductance = {l}, capacitance = {c} }}\n")
    });
    let arm = prop_oneof![Just("series"), Just("shunt")];
    let plain =
        (arm, part).prop_map(|(arm, part)| format!("[[load.ladder]]\n{arm} = {{ {part} }}\n"));
    prop::collection::vec(prop_oneof![4 => plain, 1 => tank], 0..7).prop_map(|rungs| rungs.concat())
}

fn stage() -> impl Strategy<Value = String> {
    let feed = prop_oneof![
        Just("choke = true\n".to_owned()),
        around(10e-9, 5.0).prop_map(|l| format!("inductance = {l}\n"))
    ];
    let load = prop_oneof![
        Just(String::new()),
        around(10.0, 4.0).prop_map(|x| format!("reactance = {x}\n")),
        around(10.0, 4.0).prop_map(|x| format!("reactance = -{x}\n")),
        (1.0..199.0f64, -10.0..10.0f64)
            .prop_map(|(s, a)| format!("reflection = {{ vswr = {s}, angle = {a} }}\n")),
    ];
    let curved = prop_oneof![
        3 => device(),
        1 => around(20e-12, 6.0).prop_map(|c| (String::new(), format!("capacitance = {c}\n"), String::new())),
    ];
    (
        (around(1e8, 6.0), around(6.0, 4.0), around(0.2, 7.0)),
        curved,
        0.01..0.99f64,
        (feed, around(0.05, 3.0)),
        (around(10.0, 5.0), load),
        ladder(),
    )
        .prop_map(
            |((hertz, supply, closed), (switch, drain, driver), duty, (feed, ohm), (load, at), ladder)| {
                format!(
                    "frequency = {hertz}\nsupply = {{ voltage = {supply} }}\n[switch]\nclosed_resistance = {closed}\n\
                     {switch}[drain]\n{drain}[driver]\nduty = {duty}\n{driver}[feed]\n{feed}resistance = {ohm}\n[load]\n\
                     resistance = {load}\n{at}{ladder}"
                )
            },
        )
}

fn targets() -> impl Strategy<Value = Targets> {
    let choice = prop_oneof![
        Just(Choice::NoExcess),
        Just(Choice::Choke),
        Just(Choice::DeviceCapacitance),
        (0.1..1.8f64).prop_map(Choice::FeedRatio),
    ];
    let curve = prop_oneof![
        2 => Just(None),
        1 => (around(80e-12, 3.0), 0.05..10.0f64, 0.01..3.0f64).prop_map(|(c, phi, m)| {
            Some(DrainCurve::Junction(Junction { zero_bias_f: c, potential_v: phi, grading: m }))
        }),
    ];
    let diode = prop_oneof![
        Just(None),
        (0.0..2.0f64, around(0.3, 2.0)).prop_map(|(drop_v, ohm)| Some(Diode { drop_v, ohm }))
    ];
    (
        (around(1e8, 3.0), around(3.0, 3.0), around(6.0, 2.0)),
        (0.1..0.9f64, around(50.0, 2.0), around(5.0, 1.5), choice),
        (around(0.1, 3.0), around(5e-12, 3.0), curve, diode),
        (around(0.05, 2.0), around(100.0, 2.0), around(400.0, 2.0)),
    )
        .prop_map(
            |(
                (hertz, watt, volt),
                (duty, load, q, choice),
                (closed, farad, curve, diode),
                losses,
            )| Targets {
                title: "searched".to_owned(),
                frequency_hz: hertz,
                output_w: watt,
                supply_v: volt,
                duty,
                load_ohm: load,
                loaded_q: q.clamp(1.0, 1000.0),
                choice,
                device: Device {
                    switch: Switch {
                        closed_ohm: closed,
                        open_ohm: f64::INFINITY,
                        knee: None,
                        diode,
                        arrangement: Arrangement::Single,
                    },
                    drain_f: farad,
                    drain_curve: curve,
                    gate_coupling_f: 0.0,
                    gate: None,
                },
                losses: PartLosses {
                    feed_ohm: losses.0,
                    inductor_q: losses.1,
                    capacitor_q: losses.2,
                },
            },
        )
}

#[derive(Debug, Default)]
struct Counts {
    stages: u64,
    orbits: u64,
    reasons: std::collections::BTreeMap<String, u64>,
    maps: u64,
    designs: u64,
    designed: u64,
    texts: u64,
    found: u64,
    slowest: Duration,
}

/// What is wrong with the stage in `text`, if anything.
fn try_stage(text: &str, counts: &mut Counts) -> Result<(), String> {
    let stage = match Stage::parse("any", text) {
        Ok(stage) => stage,
        Err(problem) => return note(counts, "refused", &problem.to_string()),
    };
    let again = Stage::parse("again", &stage.to_toml(&[]))
        .map_err(|p| format!("written, not read: {p}"))?;
    if again.ladder.len() != stage.ladder.len() {
        return Err("written to another ladder".to_owned());
    }
    let network = match Network::new(&stage) {
        Ok(network) => network,
        Err(error) => return note(counts, "network", &error.to_string()),
    };
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    match network.orbits(stage.supply_v, &drive) {
        Ok((orbits, _)) => {
            for orbit in &orbits {
                let numbers = [
                    orbit.output_w,
                    orbit.supply_w,
                    orbit.switch_peak_v,
                    orbit.switch_min_v,
                    orbit.closing_v,
                ];
                if !numbers.iter().all(|number| number.is_finite()) || !orbit.efficiency.is_finite()
                {
                    return Err(format!("not finite: {orbit:?}"));
                }
                if orbit.energy_residual.is_nan() || orbit.energy_residual.abs() > 1e-6 {
                    return Err(format!("unbalanced: {}", orbit.energy_residual));
                }
                if orbit.switch_peak_v < orbit.switch_min_v {
                    return Err("the peak lies below the lowest".to_owned());
                }
                // Nothing gives more than it takes.
                let taken = orbit.supply_w + orbit.driver_w;
                if orbit.output_w > taken + 1e-5 * taken.abs().max(orbit.output_w) {
                    return Err(format!("out {} of {taken}", orbit.output_w));
                }
            }
            counts.orbits += orbits.len() as u64;
        }
        Err(error) => note(counts, "orbit", &error.to_string())?,
    }
    counts.maps += 1;
    if counts.maps.is_multiple_of(8) {
        if let Ok(sweep) = Sweep::full(&network, Control::Supply, 3) {
            let _ = sweep.solve(&network);
        }
        let _ = LoadSweep::turn(3.0, 3).map(|sweep| sweep.solve(&stage, || ()));
        let _ = network.waveform(stage.supply_v, &drive, 20);
        let _ = network.settling_s(&drive);
    }
    Ok(())
}

fn note(counts: &mut Counts, step: &str, message: &str) -> Result<(), String> {
    if message.is_empty() {
        return Err(format!("{step}: an empty reason"));
    }
    // Numbers differ; the words count.
    let words: String = message
        .chars()
        .filter(|c| c.is_alphabetic() || *c == ' ')
        .take(60)
        .collect();
    *counts
        .reasons
        .entry(format!("{step}: {words}"))
        .or_default() += 1;
    Ok(())
}

fn try_design(targets: &Targets, counts: &mut Counts) -> Result<(), String> {
    counts.designs += 1;
    match design(targets) {
        Ok(design) => {
            counts.designed += 1;
            let orbit = &design.orbit;
            if !(orbit.output_w.is_finite() && orbit.energy_residual.abs() <= 1e-6) {
                return Err(format!("{orbit:?}"));
            }
            if (orbit.output_w / targets.output_w - 1.0).abs() > 1.001e-2 {
                return Err(format!(
                    "{} W in place of {}",
                    orbit.output_w, targets.output_w
                ));
            }
            Ok(())
        }
        Err(error) => note(counts, "design", &error.to_string()),
    }
}

/// `text` with a few characters or lines changed.
fn spoilt() -> impl Strategy<Value = String> {
    (
        stage(),
        prop::collection::vec((0usize..4000, "[a-z0-9.=\"{}\\[\\]\\-]{0,4}"), 1..4),
    )
        .prop_map(|(text, changes)| {
            let mut characters: Vec<char> = text.chars().collect();
            for (at, with) in changes {
                let at = at % characters.len();
                let end = (at + 1).min(characters.len());
                characters.splice(at..end, with.chars());
            }
            characters.into_iter().collect()
        })
}

#[test]
#[ignore = "runs for as long as SEARCH_SECONDS says"]
fn the_long_search_finds_nothing() {
    let variable = |name: &str| std::env::var(name).ok();
    let seconds = variable("SEARCH_SECONDS")
        .and_then(|text| text.parse().ok())
        .unwrap_or(60);
    let seed: u8 = variable("SEARCH_SEED")
        .and_then(|text| text.parse().ok())
        .unwrap_or(1);
    let path = variable("SEARCH_LOG").unwrap_or_else(|| "search-found.txt".to_owned());
    let mut log = std::fs::File::create(&path).expect("a log");
    let mut runner = TestRunner::new_with_rng(
        Config::default(),
        TestRng::from_seed(RngAlgorithm::ChaCha, &[seed; 32]),
    );
    let (stages, spoilt, targets) = (stage(), spoilt(), targets());
    let mut counts = Counts::default();
    std::panic::set_hook(Box::new(|_| ()));
    let begin = Instant::now();
    let limit = Duration::from_secs(seconds);
    let mut turn = 0u64;
    while begin.elapsed() < limit {
        turn += 1;
        let (text, targets) = match turn % 16 {
            0 => (
                None,
                Some(targets.new_tree(&mut runner).expect("targets").current()),
            ),
            1..=4 => (
                Some(spoilt.new_tree(&mut runner).expect("a text").current()),
                None,
            ),
            _ => (
                Some(stages.new_tree(&mut runner).expect("a stage").current()),
                None,
            ),
        };
        // What is being tried, for one that never comes back.
        let now = text.clone().unwrap_or_else(|| format!("{targets:?}"));
        let _ = std::fs::write(format!("{path}.now"), now);
        let start = spent(begin);
        let result = catch_unwind(AssertUnwindSafe(|| match (&text, &targets) {
            (Some(text), _) => {
                if turn % 16 <= 4 {
                    counts.texts += 1;
                } else {
                    counts.stages += 1;
                }
                try_stage(text, &mut counts)
            }
            (None, Some(targets)) => try_design(targets, &mut counts),
            (None, None) => Ok(()),
        }));
        let took = spent(begin).saturating_sub(start);
        counts.slowest = counts.slowest.max(took);
        let mut fault = match result {
            Ok(Ok(())) => String::new(),
            Ok(Err(fault)) => fault,
            Err(panic) => {
                let words = panic.downcast_ref::<String>().cloned();
                let words = words.or_else(|| panic.downcast_ref::<&str>().map(|s| (*s).to_owned()));
                format!("PANIC {}", words.unwrap_or_default())
            }
        };
        if took > SLOW {
            let _ = write!(fault, " SLOW {took:?}");
        }
        if !fault.is_empty() {
            counts.found += 1;
            let what = text.unwrap_or_else(|| format!("{targets:?}"));
            let _ = writeln!(log, "== {turn}: {fault}\n{what}\n");
            let _ = log.flush();
        }
    }
    let _ = std::panic::take_hook();
    println!(
        "seed {seed}, {:.0} s, {turn} turns: {counts:#?}",
        begin.elapsed().as_secs_f64()
    );
    assert_eq!(counts.found, 0, "see {path}");
}
