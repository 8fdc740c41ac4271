//! The replay of a linear stage against its orbit, SciPy's integrator, its own energy balance and the map.

use std::f64::consts::TAU;

use num_complex::Complex64;
use quietedge::orbit::{Drive, Network};
use quietedge::stage::Stage;
use quietedge::transmit::{
    Account, Cut, Cycle, CycleOutput, Form, Gate, Interval, Pulse, Replay, ReplayError, Segments,
    Setup, Timing, replay_all, replay_cut,
};

/// The stage of `tests/reference/replay.py`.
const STAGE: &str = r#"
frequency = "169.4 MHz"
supply = { voltage = "6 V" }
switch = { closed_resistance = "0.18 ohm" }
drain = { capacitance = "47 pF" }
feed = { inductance = "8.2 nH", resistance = "50 mohm" }
[load]
resistance = "7 ohm"
[[load.ladder]]
series = { inductance = "33 nH", q = 80 }
[[load.ladder]]
series = { capacitance = "30 pF" }
"#;

fn network(text: &str) -> (Network, Drive) {
    let stage = Stage::parse("replay.toml", text).expect("a stage");
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    (Network::new(&stage).expect("a network"), drive)
}

fn ramp(drive: &Drive, supply_v: [f64; 2], phase_rad: [f64; 2]) -> Cycle {
    Cycle {
        supply_v,
        pulse: Pulse::phased(drive, phase_rad[0], phase_rad[1] - phase_rad[0]),
    }
}

fn constant(drive: &Drive, supply_v: f64, phase_rad: f64) -> Cycle {
    ramp(drive, [supply_v; 2], [phase_rad; 2])
}

/// Losses apart, in the fastest form.
fn losses() -> Setup {
    Setup::of(Account::Losses)
}

fn nested(account: Account) -> Setup {
    Setup {
        form: Form::Nested,
        ..Setup::of(account)
    }
}

const TIDE_GAUGE: &str = include_str!("../signals/tide-gauge.stage.toml");

const ROBOT_LINK: &str = include_str!("../signals/robot-link.stage.toml");

/// The demo stages and that of the reference are well-conditioned in both positions.
#[test]
fn ordinary_stages_are_replayed_in_modal_form() {
    for text in [STAGE, TIDE_GAUGE, ROBOT_LINK] {
        let (network, drive) = network(text);
        let replay = Replay::new(&network, &drive, losses()).expect("a replay");
        let conditions = replay.conditions();
        assert!(
            conditions
                .iter()
                .all(|condition| condition.is_some_and(|c| c < 1e3)),
            "{conditions:?}"
        );
    }
}

#[test]
fn a_constant_track_is_the_orbit() {
    for (text, setup) in [
        (STAGE, losses()),
        (TIDE_GAUGE, losses()),
        (TIDE_GAUGE, nested(Account::Losses)),
        (ROBOT_LINK, losses()),
    ] {
        let (network, drive) = network(text);
        let orbit = network.orbit(5.3, &drive).expect("an orbit");
        let setup = Setup {
            harmonics: 3,
            ..setup
        };
        let mut replay = Replay::new(&network, &drive, setup).expect("a replay");
        for phase_rad in [0.0, 0.4, 1.6, -2.9, 40.0] {
            let cycle = constant(&drive, 5.3, phase_rad);
            replay.settle(&cycle).expect("an orbit");
            let mut last = CycleOutput::default();
            for _ in 0..50 {
                last = replay.cycle(&cycle).expect("a cycle");
            }
            let expected = orbit.output_v * Complex64::cis(phase_rad);
            let miss = (last.output_v - expected).norm() / expected.norm();
            assert!(miss < 1e-10, "{phase_rad}: {miss:.1e}");
            for (at, harmonic_v) in last.harmonics_v.iter().enumerate() {
                let dbc = 20.0 * (harmonic_v.norm() / expected.norm()).log10();
                assert!((dbc - orbit.harmonics_dbc[at]).abs() < 1e-8, "{at}: {dbc}");
            }
            let period_s = network.stage().period_s();
            let energies = last.energies;
            for (name, joule, watt) in [
                ("supply", energies.supply_j, orbit.supply_w),
                (
                    "load",
                    energies.load_j,
                    orbit.output_w + orbit.losses.harmonics,
                ),
                (
                    "switch",
                    energies.switch_j,
                    orbit.losses.closed_switch + orbit.losses.open_switch,
                ),
                ("feed", energies.feed_j, orbit.losses.feed),
                ("ladder", energies.ladder_j, orbit.losses.ladder),
                ("choke", energies.choke_j, 0.0),
            ] {
                let miss = (joule / period_s - watt).abs() / orbit.supply_w;
                assert!(miss < 1e-10, "{name}: {miss:.1e}");
            }
        }
        // From rest, once everything has died away.
        replay.rest();
        let cycle = constant(&drive, 5.3, 0.4);
        let settled = replay.memory_cycles(&cycle, 1e-12).expect("a number");
        assert!(settled < 4096, "{settled}");
        let mut last = Complex64::ZERO;
        for _ in 0..settled {
            last = replay.cycle(&cycle).expect("a cycle").output_v;
        }
        let expected = orbit.output_v * Complex64::cis(0.4);
        assert!((last - expected).norm() / expected.norm() < 1e-10);
    }
}

/// Another width is another orbit, the choke's current included.
#[test]
fn other_widths_are_their_own_orbits() {
    // Cubics through 513 widths leave a few parts in 1e9 of the choke's current between them.
    for (text, allowed) in [(TIDE_GAUGE, 1e-10), (ROBOT_LINK, 1e-8)] {
        let (network, full) = network(text);
        let mut replay = Replay::new(&network, &full, losses()).expect("a replay");
        for duty in [0.05, 0.2137, 0.4] {
            let drive = Drive::new(&network.stage().driver, duty);
            let orbit = network.orbit(4.0, &drive).expect("an orbit");
            let cycle = constant(&drive, 4.0, 0.3);
            replay.settle(&cycle).expect("an orbit");
            let out = replay.cycle(&cycle).expect("a cycle").output_v;
            let expected = orbit.output_v * Complex64::cis(0.3);
            let miss = (out - expected).norm() / expected.norm();
            assert!(miss < allowed, "{duty}: {miss:.1e}");
        }
    }
}

/// The controls of `tests/reference/replay.py`.
fn reference_cycle(drive: &Drive, n: usize) -> Cycle {
    let part = |at: f64, from: f64, length: f64| ((at - from) / length).clamp(0.0, 1.0);
    let supply = |at: f64| 6.0 - 4.0 * part(at, 100.0, 40.0);
    let phase = |at: f64| 0.8 * part(at, 80.0, 100.0) - 2.5 * part(at, 150.0, 10.0);
    let at = n as f64;
    let supply_v = if n < 60 {
        [4.0, 4.0]
    } else {
        [supply(at), supply(at + 1.0)]
    };
    ramp(drive, supply_v, [phase(at), phase(at + 1.0)])
}

/// SciPy 1.17.1 (solve_ivp, DOP853, rtol 1e-11), `tests/reference/replay.py`: 200 cycles from rest with steps and
/// ramps of the supply and of the phase. 1e-7 of the largest value is asked for; both are far closer.
#[test]
fn two_hundred_cycles_agree_with_an_integrator() {
    let text = include_str!("reference/replay.json");
    let reference: serde_json::Value = serde_json::from_str(text).expect("JSON");
    let rows: Vec<Vec<f64>> = serde_json::from_value(reference["rows"].clone()).expect("rows");
    assert_eq!(rows.len(), 200);
    let largest: Vec<f64> = (0..5)
        .map(|at| rows.iter().map(|row| row[at].abs()).fold(0.0, f64::max))
        .collect();
    let (network, drive) = network(STAGE);
    for setup in [losses(), nested(Account::Losses)] {
        let mut replay = Replay::new(&network, &drive, setup).expect("a replay");
        let modal = replay.conditions().iter().all(Option::is_some);
        assert_eq!(modal, setup.form == Form::Fastest);
        for (n, row) in rows.iter().enumerate() {
            let out = replay.cycle(&reference_cycle(&drive, n)).expect("a cycle");
            let found = [
                out.output_v.re,
                out.output_v.im,
                out.energies.supply_j,
                out.energies.load_j,
                out.energies.losses_j(),
            ];
            for at in 0..5 {
                let miss = (found[at] - row[at]).abs() / largest[at];
                assert!(miss < 1e-8, "cycle {n}, column {at}: {miss:.1e}");
            }
        }
        let stored_j = reference["stored_j"].as_f64().expect("a number");
        assert!((replay.stored_j() / stored_j - 1.0).abs() < 1e-8);
    }
}

/// Supply, phase and width in lively motion.
fn lively(network: &Network, n: usize) -> Cycle {
    let controls = |at: f64| {
        let duty = 0.3 + 0.15 * (0.017 * at).sin();
        let drive = Drive::new(&network.stage().driver, duty);
        (
            3.0 + 2.5 * (0.013 * at).sin(),
            drive,
            2.0 * (0.021 * at).cos() - 0.03 * at,
        )
    };
    let (start, end) = (controls(n as f64), controls(n as f64 + 1.0));
    Cycle {
        supply_v: [start.0, end.0],
        pulse: Pulse::between(&start.1, &end.1, start.2, end.2 - start.2),
    }
}

#[test]
fn energy_in_is_energy_out_lost_and_stored() {
    // The last stage rings without loss while its switch is open: its energies come from second moments.
    let lossless = std::fs::read_to_string("tests/bad/legal/lossless_tank_to_ground.toml");
    let lossless = lossless.expect("a stage file");
    for (text, count) in [
        (STAGE, 10_000),
        (TIDE_GAUGE, 10_000),
        (ROBOT_LINK, 10_000),
        (&lossless, 500),
    ] {
        let (network, drive) = network(text);
        let mut replay = Replay::new(&network, &drive, losses()).expect("a replay");
        let (mut given_j, mut spent_j) = (0.0, 0.0);
        for n in 0..count {
            let out = replay.cycle(&lively(&network, n)).expect("a cycle");
            given_j += out.energies.supply_j;
            spent_j += out.energies.load_j + out.energies.losses_j() + out.energies.choke_j;
            if n % 100 == 3 {
                let residual = (given_j - spent_j - replay.stored_j()) / given_j;
                assert!(residual.abs() < 1e-9, "cycle {n}: {residual:.1e}");
            }
        }
    }
}

/// Every edge of the one form is that of the other.
#[test]
fn both_forms_agree_on_lively_controls() {
    for text in [TIDE_GAUGE, ROBOT_LINK] {
        let (network, drive) = network(text);
        let setups = [Setup::of(Account::Supply), nested(Account::Supply)];
        let mut replays =
            setups.map(|setup| Replay::new(&network, &drive, setup).expect("a replay"));
        let mut largest = 0.0f64;
        for n in 0..3000 {
            let cycle = lively(&network, n);
            let [a, b] = [0, 1].map(|at| replays[at].cycle(&cycle).expect("a cycle"));
            largest = largest.max(a.output_v.norm());
            assert!((a.output_v - b.output_v).norm() < 1e-11 * largest, "{n}");
            let supply_j = a.energies.supply_j - b.energies.supply_j;
            assert!(supply_j.abs() < 1e-10 * a.energies.supply_j.abs().max(1e-12));
        }
    }
}

/// The slower the tone on the supply or the width, the closer to the map: what is left is the first-order lag, in
/// proportion to the tone's frequency.
#[test]
fn a_slow_tone_converges_to_the_map_with_slope_one() {
    let (network, full) = network(TIDE_GAUGE);
    let driver = &network.stage().driver;
    let tone = |at: f64, period: f64, moves_width: bool| {
        let swing = (TAU * at / period).sin();
        if moves_width {
            (4.0, Drive::new(driver, 0.35 + 0.1 * swing))
        } else {
            (3.0 + 2.0 * swing, full)
        }
    };
    for moves_width in [false, true] {
        let mut errors = Vec::new();
        for period in [2_000.0, 4_000.0, 8_000.0] {
            let mut replay =
                Replay::new(&network, &full, Setup::of(Account::Envelope)).expect("a replay");
            let cycle = |n: f64| {
                let (start, end) = (
                    tone(n, period, moves_width),
                    tone(n + 1.0, period, moves_width),
                );
                Cycle {
                    supply_v: [start.0, end.0],
                    pulse: Pulse::between(&start.1, &end.1, 0.0, 0.0),
                }
            };
            replay.settle(&cycle(0.0)).expect("an orbit");
            let (mut error, mut power) = (0.0, 0.0);
            for n in 0..(1.25 * period) as u32 {
                let at = f64::from(n);
                let out = replay.cycle(&cycle(at)).expect("a cycle");
                // A sixteenth of the cycles is enough for the mean.
                if at >= 0.25 * period && n % 16 == 0 {
                    let (supply_v, drive) = tone(at + 0.5, period, moves_width);
                    let by_map = network.orbit(supply_v, &drive).expect("an orbit").output_v;
                    error += (out.output_v - by_map).norm_sqr();
                    power += by_map.norm_sqr();
                }
            }
            errors.push((error / power).sqrt());
        }
        for pair in errors.windows(2) {
            let slope = (pair[0] / pair[1]).log2();
            // Second-order terms fade with the tone: 1 % covers them from a period of 2,000 cycles on.
            assert!((slope - 1.0).abs() < 1e-2, "{errors:?}");
        }
    }
}

/// Segments side by side give what one run gives: 1e-9 is asked for, the overlap leaves 1e-12.
#[test]
fn segments_in_parallel_are_the_serial_run() {
    let (network, drive) = network(TIDE_GAUGE);
    let timing = Timing {
        jitter_rad: 0.002,
        grid_rad: 0.01,
        seed: 9,
    };
    let new = || {
        let replay = Replay::new(&network, &drive, losses()).expect("a replay");
        replay.with_timing(timing)
    };
    let cycles: Vec<Cycle> = (0..9_000).map(|n| lively(&network, n)).collect();
    let (mut serial, mut parallel) = (new(), new());
    let overlap = serial.memory_cycles(&cycles[0], 1e-12).expect("it settles");
    let (mut one, mut many) = (Vec::new(), Vec::new());
    let segments = |workers| Segments { workers, overlap };
    // Two stretches, so that the state is carried on.
    for stretch in [&cycles[..5_000], &cycles[5_000..]] {
        let mut out = Vec::new();
        replay_all(&mut serial, stretch, segments(1), &mut out).expect("a run");
        one.append(&mut out);
        replay_all(&mut parallel, stretch, segments(3), &mut out).expect("a run");
        many.append(&mut out);
    }
    assert_eq!(serial.cycles(), parallel.cycles());
    let largest = one
        .iter()
        .map(|out| out.output_v.norm())
        .fold(0.0, f64::max);
    for (a, b) in one.iter().zip(&many) {
        assert!((a.output_v - b.output_v).norm() < 1e-9 * largest);
        let [a, b] = [a, b].map(|out| out.energies.supply_j);
        assert!((a - b).abs() < 1e-9 * a.abs().max(1e-9));
    }
    // With hardly any overlap the cuts show: there are some, and the overlap is what hides them.
    let mut out = Vec::new();
    let short = Segments {
        workers: 3,
        overlap: 1,
    };
    replay_all(&mut new(), &cycles[..5_000], short, &mut out).expect("a run");
    let pairs = one.iter().zip(&out);
    let apart = pairs.filter(|(a, b)| (a.output_v - b.output_v).norm() > 1e-9 * largest);
    assert!(apart.count() > 2);
}

/// An ideal voltage-switching pair into a resistor, its pulse width moved by a tone and cut naturally: the double
/// Fourier series (W. R. Bennett, "New results in the calculation of modulation products", Bell Syst. Tech. J. 12
/// (1933), the method; for a centred pulse of width `d + m cos y` the line at `carrier + k tone` is
/// `2 V / pi J_k(pi m) sin(pi d + k pi / 2)`, an integral over the pulse's edges by hand).
#[test]
fn exact_width_modulation_has_the_lines_of_the_double_fourier_series() {
    let text = r#"
frequency = "1 MHz"
supply = { voltage = "10 V" }
switch = { arrangement = "pair", closed_resistance = "1 mohm", upper_resistance = "1 mohm" }
drain = { capacitance = "1 pF" }
[load]
resistance = "50 ohm"
"#;
    let (network, _) = network(text);
    let driver = &network.stage().driver;
    let envelope = Setup::of(Account::Envelope);
    let (d, m, period) = (0.3, 0.18, 400usize);
    let width = |n: usize| Drive::new(driver, d + m * (TAU * n as f64 / period as f64).cos());
    let mut replay = Replay::new(&network, &width(0), envelope).expect("a replay");
    let mut outputs = vec![CycleOutput::default()];
    for n in 0..2 * period {
        let cycle = Cycle {
            supply_v: [10.0; 2],
            pulse: Pulse::between(&width(n), &width(n + 1), 0.0, 0.0),
        };
        outputs.push(replay.cycle(&cycle).expect("a cycle"));
    }
    // J_k(0.18 pi), SciPy 1.17.1 scipy.special.jv.
    let bessel = [
        0.921_639_835_384_468,
        0.271_591_136_416_504,
        0.038_917_317_074_019,
        0.003_692_569_548_148,
    ];
    for (k, bessel) in bessel.iter().enumerate() {
        let line: Complex64 = (0..period)
            .map(|n| {
                // Border n of the second period.
                let at = period + n;
                let value = outputs[at].border_v(&outputs[at + 1]);
                value * Complex64::cis(-TAU * (k * n) as f64 / period as f64)
            })
            .sum::<Complex64>()
            / period as f64;
        let angle = std::f64::consts::PI * (d + 0.5 * k as f64);
        let law = 20.0 / std::f64::consts::PI * bessel * angle.sin().abs();
        let off_db = 20.0 * (line.norm() / law).log10();
        assert!(off_db.abs() < 0.01, "line {k}: {off_db:.4} dB");
    }
}

/// A gate that cuts the pulses: the same cycles as intervals, and free ringing while the switch stays open.
#[test]
fn intervals_of_any_order_are_replayed() {
    let (network, drive) = network(TIDE_GAUGE);
    let new = || Replay::new(&network, &drive, losses()).expect("a replay");
    let (mut by_pulse, mut by_interval) = (new(), new());
    let quarter = TAU / 4.0;
    let pieces = [(1, quarter), (0, quarter), (0, quarter), (1, quarter)];
    let pieces = pieces.map(|(topology, length_rad)| Interval {
        topology,
        length_rad,
    });
    let off = [Interval {
        topology: 0,
        length_rad: TAU,
    }];
    let (mut given_j, mut spent_j) = (0.0, 0.0);
    for n in 0..400 {
        let on = n % 100 < 30;
        let pulse = if on {
            Pulse::phased(&drive, 0.0, 0.0)
        } else {
            Pulse::Off
        };
        let supply_v = [5.0; 2];
        let a = by_pulse.cycle(&Cycle { supply_v, pulse }).expect("a cycle");
        let intervals: &[Interval] = if on { &pieces } else { &off };
        let b = by_interval.cycle_of(supply_v, intervals).expect("a cycle");
        assert!((a.output_v - b.output_v).norm() < 1e-12);
        given_j += a.energies.supply_j;
        spent_j += a.energies.load_j + a.energies.losses_j();
    }
    let residual = (given_j - spent_j - by_pulse.stored_j()) / given_j;
    assert!(residual.abs() < 1e-9, "{residual:.1e}");
    let short = [Interval {
        topology: 0,
        length_rad: 1.0,
    }];
    assert!(matches!(
        by_pulse.cycle_of([1.0; 2], &short),
        Err(ReplayError::Intervals { cycle: 400, .. })
    ));
}

/// A burst's gate: the pulses that lie inside it, cut where it starts and stops within one.
#[test]
fn a_gate_cuts_pulses_and_a_list_of_edges_says_the_same() {
    let (network, drive) = network(TIDE_GAUGE);
    let new = || Replay::new(&network, &drive, losses()).expect("a replay");
    // On from within the pulse around angle 40 turns to within the one around 70 turns.
    let (on, off) = (TAU * 40.0 + 0.3, TAU * 70.0 - 0.2);
    let mut gate = Gate::new([(on, true), (off, false)].into_iter());
    // The same by hand: high where pulse and gate are.
    let mut edges = vec![(on, true)];
    edges.push((TAU * 40.25, false));
    for n in 41..70 {
        edges.push((TAU * (f64::from(n) - 0.25), true));
        edges.push((TAU * (f64::from(n) + 0.25), false));
    }
    edges.push((TAU * 69.75, true));
    edges.push((off, false));
    let mut list = Gate::new(edges.into_iter());
    let (mut by_gate, mut by_list) = (new(), new());
    let mut windows = Vec::new();
    let (mut largest, mut last) = (0.0f64, 0.0);
    for _ in 0..300 {
        gate.cycle(&mut windows);
        let cycle = constant(&drive, 5.0, 0.0);
        let a = by_gate.cycle_gated(&cycle, &windows).expect("a cycle");
        list.cycle(&mut windows);
        let b = by_list.cycle_pulsed([5.0; 2], &windows).expect("a cycle");
        assert!((a.output_v - b.output_v).norm() < 1e-10);
        (largest, last) = (largest.max(a.output_v.norm()), a.output_v.norm());
    }
    // It worked, and rang out afterwards.
    assert!(largest > 15.0 && last < 0.01 * largest, "{largest} {last}");
}

/// Bursts of some cycles' length between three widths, off included, phase and edges anywhere.
fn bursts(drives: &[Drive; 2], count: usize) -> (Vec<Cycle>, Vec<Cut>) {
    let phase = |n: usize| 0.9 * (0.07 * n as f64).sin();
    let pulse = |level: usize, n: usize| match level.checked_sub(1) {
        Some(at) => Pulse::phased(&drives[at], phase(n), phase(n + 1) - phase(n)),
        None => Pulse::Off,
    };
    let (mut level, mut next) = (0, 3.7);
    let (mut cycles, mut cuts) = (Vec::new(), Vec::new());
    for cycle in 0..count {
        cycles.push(Cycle {
            supply_v: [5.0; 2],
            pulse: pulse(level, cycle),
        });
        let mut number = 0;
        while next < (cycle + 1) as f64 {
            level = (level + 1 + (cycle + number) % 2) % 3;
            number += 1;
            cuts.push(Cut {
                cycle,
                from_rad: TAU * (next - cycle as f64),
                pulse: pulse(level, cycle),
            });
            next += 0.31 + 17.0 * (next * 12.9898).sin().powi(2);
        }
    }
    (cycles, cuts)
}

#[test]
fn bursts_keep_their_energy_and_segments_are_the_serial_run() {
    // No gate stops an ideal choke.
    let fed = ROBOT_LINK.replace("choke = true", "inductance = \"40 nH\"");
    for text in [STAGE, TIDE_GAUGE, &fed] {
        let (network, drive) = network(text);
        let narrow = Drive::new(&network.stage().driver, 0.4 * network.stage().driver.duty);
        let (cycles, cuts) = bursts(&[narrow, drive], 40_000);
        let run = |workers| {
            let mut replay = Replay::new(&network, &drive, losses()).expect("a replay");
            replay.settle(&cycles[0]).expect("an orbit");
            let before_j = replay.stored_j();
            let open = replay.memory_cycles(&cycles[0], 1e-13).expect("it settles");
            let closed = constant(&drive, 5.0, 0.0);
            let overlap = replay.memory_cycles(&closed, 1e-13).expect("it settles");
            let overlap = overlap.max(open);
            assert!(4 * overlap < 10_000, "{overlap}");
            let mut outputs = Vec::new();
            let segments = Segments { workers, overlap };
            replay_cut(&mut replay, &cycles, &cuts, segments, &mut outputs).expect("a run");
            (outputs, replay.stored_j() - before_j)
        };
        let (serial, stored_j) = run(1);
        let sum = |part: fn(&CycleOutput) -> f64| serial.iter().map(part).sum::<f64>();
        let supply_j = sum(|one| one.energies.supply_j);
        let left_j = supply_j - sum(|one| one.energies.load_j + one.energies.losses_j()) - stored_j;
        // Rounding of 40,000 cycles of some ten terms each.
        assert!(
            (left_j / supply_j).abs() < 1e-9,
            "{:.1e}",
            left_j / supply_j
        );
        let (parallel, _) = run(3);
        let largest = serial
            .iter()
            .map(|one| one.output_v.norm())
            .fold(0.0, f64::max);
        assert!(largest > 1.0);
        for (a, b) in serial.iter().zip(&parallel) {
            assert!((a.output_v - b.output_v).norm() < 1e-9 * largest);
        }
    }
}

/// Cuts say the same as a gate's windows; a cut that changes nothing changes nothing.
#[test]
fn cuts_agree_with_windows() {
    let (network, drive) = network(STAGE);
    let new = || Replay::new(&network, &drive, losses()).expect("a replay");
    let (mut by_cuts, mut by_windows) = (new(), new());
    for n in 0..200 {
        let on = constant(&drive, 5.0, 0.03 * f64::from(n));
        let (from, to) = (
            TAU * (0.137 * f64::from(n)).fract(),
            TAU * (0.291 * f64::from(n)).fract(),
        );
        let [from, to] = [from.min(to), from.max(to)];
        let cut = |from_rad, pulse| Cut {
            cycle: 0,
            from_rad,
            pulse,
        };
        let off = Cycle {
            pulse: Pulse::Off,
            ..on
        };
        let middle = cut(0.5 * (from + to), on.pulse);
        let cuts = [cut(from, on.pulse), middle, cut(to, Pulse::Off)];
        let a = by_cuts.cycle_cut(&off, &cuts).expect("a cycle");
        let b = by_windows.cycle_gated(&on, &[[from, to]]).expect("a cycle");
        // One propagation more, volts of order 10.
        assert!((a.output_v - b.output_v).norm() < 1e-11, "{n}");
        assert!(
            (a.energies.supply_j - b.energies.supply_j).abs() < 1e-18,
            "{n}"
        );
    }
}

/// Equal resonators, resonances without loss, extreme parts: what is replayed equals the orbit. Traps at the carrier
/// leave next to no output, so that the difference is held against the supply.
#[test]
fn awkward_stages_still_equal_their_orbit() {
    let (mut modal, mut tables) = (0, 0);
    for entry in std::fs::read_dir("tests/bad/legal").expect("a folder") {
        let path = entry.expect("a file").path();
        let name = path.display().to_string();
        let bytes = std::fs::read(&path).expect("a stage file");
        let text = String::from_utf8_lossy(&bytes).into_owned();
        let stage = Stage::parse("legal.toml", text.trim_start_matches('\u{feff}'));
        let stage = stage.expect("a stage");
        let drive = Drive::new(&stage.driver, stage.driver.duty);
        let network = Network::new(&stage).expect("a network");
        let orbit = network.orbit(1.0, &drive).expect("an orbit");
        let setup = Setup::of(Account::Supply);
        let mut replay = match Replay::new(&network, &drive, setup) {
            Ok(replay) => replay,
            Err(error) => {
                assert_eq!(error, ReplayError::Curved, "{name}");
                continue;
            }
        };
        match replay.conditions().iter().all(Option::is_some) {
            true => modal += 1,
            false => tables += 1,
        }
        let cycle = constant(&drive, 1.0, 0.3);
        replay.settle(&cycle).expect("an orbit");
        let out = replay.cycle(&cycle).expect("a cycle");
        let miss = (out.output_v - orbit.output_v * Complex64::cis(0.3)).norm();
        // A stage that rings for long multiplies rounding by its settling time in cycles.
        let settling = network.settling_s(&drive) * stage.frequency_hz;
        let allowed = 1e-10f64.max(1e-14 * settling);
        assert!(
            miss < allowed,
            "{name}: {miss:.1e}, settling {settling:.1e} cycles"
        );
        let supply_w = out.energies.supply_j * stage.frequency_hz;
        let off = (supply_w - orbit.supply_w).abs() / orbit.supply_w;
        assert!(off < 1e-8, "{name}: {off:.1e}");
    }
    assert!(modal >= 3 && tables >= 2, "{modal} {tables}");
}

#[test]
fn what_cannot_be_replayed_is_refused() {
    let diode = STAGE.replace(
        "closed_resistance = \"0.18 ohm\"",
        "closed_resistance = \"0.18 ohm\", diode = { drop = \"0.8 V\", resistance = \"0.2 ohm\" }",
    );
    let envelope = Setup::of(Account::Envelope);
    let (curved, drive) = network(&diode);
    let error = Replay::new(&curved, &drive, envelope).expect_err("refused");
    assert_eq!(error, ReplayError::Curved);
    let (choke, drive) = network(ROBOT_LINK);
    let mut replay = Replay::new(&choke, &drive, envelope).expect("a replay");
    let off = Cycle {
        supply_v: [1.0; 2],
        pulse: Pulse::Off,
    };
    assert_eq!(
        replay.cycle(&off),
        Err(ReplayError::ChokeIntoOpen { cycle: 0 })
    );
    let (network, drive) = network(STAGE);
    let mut replay = Replay::new(&network, &drive, envelope).expect("a replay");
    replay.cycle(&constant(&drive, 1.0, 0.0)).expect("a cycle");
    assert!(matches!(
        replay.cycle(&ramp(&drive, [1.0; 2], [0.0, -6.2])),
        Err(ReplayError::EdgeTooFast { cycle: 1, .. })
    ));
    assert_eq!(
        replay.cycle(&constant(&drive, f64::NAN, 0.0)),
        Err(ReplayError::NotFinite { cycle: 1 })
    );
}
