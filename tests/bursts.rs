//! Pulses that gate the stage, held against published spectra and laws.

use std::f64::consts::{PI, TAU};

use std::io::{self, Cursor};
use std::sync::Arc;

use num_complex::Complex64;
use proptest::prelude::*;
use quietedge::drive::{
    BandFilter, BandShape, BurstScheme, GateFigures, MovedEdges, PhasePath, PulseFile,
    PulseSequence, Sampling, Scheme, StopBand, Track, Updates,
};
use quietedge::input::{Files, ReadSeek};
use quietedge::map::{Control, Map, MapPoint, Origin};
use quietedge::report::gate::{gate_csv, gate_vcd};
use quietedge::signal::{PulseOptions, SignalError, read_edges};
use quietedge::stage::Anchor;
use quietedge::study::GateTrain;
use quietedge::transmit::MapTransmitter;

const RATE_HZ: f64 = 1e6;

/// Rectangular pulses, 8 V at full width into 50 ohm, 0.1 A from 10 V there: efficiency 0.64.
fn map() -> Map {
    let points = (1..=400).map(|at| {
        let width = 0.5 * f64::from(at) / 400.0;
        let volt = 8.0 * (PI * width).sin();
        MapPoint {
            control: width,
            output_v: Complex64::from_polar(volt, 0.4 + width),
            supply_v: 10.0,
            supply_a: Some(0.1 * volt / 8.0),
            efficiency: None,
            switch_peak_v: None,
            switch_peak_a: None,
            switch_min_v: None,
            closing_v: None,
            driver_w: None,
        }
    });
    Map::new(Control::Width, Origin::Stage, 1e8, 50.0, points.collect()).unwrap()
}

fn scheme(sampling: Sampling, edges: MovedEdges) -> BurstScheme {
    BurstScheme {
        sampling,
        rate_hz: 50e3,
        edges,
        updates: Updates::Once,
        order: 1,
        levels: 2,
        grid_s: None,
        shortest_s: 0.0,
        delay_s: 0.0,
        phase_path: PhasePath::default(),
        transitions_s: None,
        filter: None,
        pulses: None,
    }
}

fn track(scheme: &BurstScheme, map: &Map, samples: &[Complex64], rate_hz: f64) -> Track {
    let mut track = Track::default();
    Scheme::Burst(scheme.clone())
        .drive(map, Anchor::Centre, 1.0, 0.5, rate_hz)
        .push(samples, &mut track);
    track
}

/// A magnitude of `mean + swing cos` at 1 kHz, for 25 ms.
fn tone(mean: f64, swing: f64) -> Vec<Complex64> {
    (0..25_000)
        .map(|n| Complex64::new(mean + swing * (TAU * 1e-3 * f64::from(n)).cos(), 0.0))
        .collect()
}

/// Real amplitude of the line at `hz` over the last 20 ms, parts of full output.
fn line(output_v: &[Complex64], hz: f64) -> f64 {
    let window = &output_v[output_v.len() - 20_000..];
    let sum: Complex64 = window
        .iter()
        .enumerate()
        .map(|(n, v)| v * Complex64::cis(-TAU * (hz / RATE_HZ * n as f64).fract()))
        .sum();
    let twice = if hz == 0.0 { 1.0 } else { 2.0 };
    twice * sum.norm() / 20_000.0 / 8.0
}

/// Bessel function of integer order by its integral, `(1/pi) integral cos(n t - x sin t)`: a sum over a period of a
/// smooth periodic function, exact to rounding at 400 points.
fn bessel(n: i32, x: f64) -> f64 {
    let points = 400;
    let sum: f64 = (0..points)
        .map(|k| {
            let t = TAU * f64::from(k) / f64::from(points);
            (f64::from(n) * t - x * t.sin()).cos()
        })
        .sum();
    sum / f64::from(points)
}

#[test]
fn the_bessel_function_is_the_tabulated_one() {
    // scipy 1.17.1, scipy.special.jv: jv(0, 2.5) = -0.04838377646819792, jv(3, 4.2) = 0.4343942763872008.
    assert!((bessel(0, 2.5) + 0.048_383_776_468_198).abs() < 1e-14);
    assert!((bessel(3, 4.2) - 0.434_394_276_387_200_7).abs() < 1e-12);
}

/// Every line `k Omega + n omega` below 0.4 of the rate that is stronger than -60 dB of full output.
fn hold(scheme: &BurstScheme, law: impl Fn(f64, i32, f64) -> f64) {
    let (map, mean, swing) = (map(), 0.53, 0.4);
    let track = track(scheme, &map, &tone(mean, swing), RATE_HZ);
    let mut held = 0;
    let mut worst = 0.0f64;
    for k in 1..8 {
        for n in -20i32..=20 {
            let hz = 50e3 * f64::from(k) + 1e3 * f64::from(n);
            if hz > 395e3 {
                continue;
            }
            // Lines of the next multiple lie on the same frequency from n = 25 on, below 1e-6 there for k of 1.
            let law = law(f64::from(k), n, swing);
            if law.abs() < 1e-3 || k > 3 {
                continue;
            }
            let got = line(&track.output_v, hz);
            let error_db = 20.0 * (got / law.abs()).log10();
            worst = worst.max(error_db.abs());
            held += 1;
            assert!(error_db.abs() < 0.01, "{k} {n}: {got} {law}");
        }
    }
    println!("{held} lines, worst {worst:.5} dB");
    assert!(held > 20);
}

#[test]
fn natural_sampling_has_the_lines_of_black() {
    // H. S. Black, "Modulation Theory", 1953: double Fourier series. The second edge moves:
    // (1 - J0(2 pi k M) exp(-j 2 pi k D)) / (pi k) and J_n(2 pi k M) / (pi k).
    let mean = 0.53;
    hold(
        &scheme(Sampling::Natural, MovedEdges::One),
        |k, n, swing| {
            let bessel = bessel(n.abs(), TAU * k * swing) / (PI * k);
            if n == 0 {
                (1.0 / (PI * k) - bessel * Complex64::cis(-TAU * k * mean)).norm()
            } else {
                bessel
            }
        },
    );
    // Both edges move: 2 J_n(pi k M) sin(pi k D + n pi / 2) / (pi k).
    hold(
        &scheme(Sampling::Natural, MovedEdges::Two),
        |k, n, swing| {
            2.0 * bessel(n.abs(), PI * k * swing) * (PI * k * mean + 0.5 * PI * f64::from(n)).sin()
                / (PI * k)
        },
    );
}

#[test]
fn uniform_sampling_has_lines_at_their_own_argument() {
    // The same with k + n omega / Omega in place of k: the samples stand still over a period.
    let mean = 0.53;
    let ratio = |k: f64, n: i32| k + f64::from(n) / 50.0;
    let sign = |n: i32| if n < 0 && n % 2 != 0 { -1.0 } else { 1.0 };
    hold(
        &scheme(Sampling::Uniform, MovedEdges::One),
        |k, n, swing| {
            let x = ratio(k, n);
            let bessel = sign(n) * bessel(n.abs(), TAU * x * swing) / (PI * x);
            if n == 0 {
                (1.0 / (PI * x) - bessel * Complex64::cis(-TAU * x * mean)).norm()
            } else {
                bessel
            }
        },
    );
    hold(
        &scheme(Sampling::Uniform, MovedEdges::Two),
        |k, n, swing| {
            let x = ratio(k, n);
            2.0 * bessel(n.abs(), PI * x * swing) * (PI * x * mean + 0.5 * PI * f64::from(n)).sin()
                / (PI * x)
        },
    );
    // And harmonics of the tone, which natural sampling has not: J_n(pi x M) with x = n omega / Omega.
    let map = map();
    let uniform = track(
        &scheme(Sampling::Uniform, MovedEdges::One),
        &map,
        &tone(mean, 0.4),
        RATE_HZ,
    );
    let natural = track(
        &scheme(Sampling::Natural, MovedEdges::One),
        &map,
        &tone(mean, 0.4),
        RATE_HZ,
    );
    let x: f64 = 2.0 / 50.0;
    let law = bessel(2, TAU * x * 0.4) / (PI * x);
    let got = line(&uniform.output_v, 2e3);
    assert!((20.0 * (got / law).log10()).abs() < 0.01, "{got} {law}");
    // The cubic between twenty instants of a period of 1000 leaves 1e-9 of a tone; the observer's ripple is 1e-5.
    assert!(line(&natural.output_v, 2e3) < 1e-6);
    assert!((line(&natural.output_v, 1e3) - 0.4).abs() < 1e-5);
}

#[test]
fn nothing_folds_into_the_clean_band() {
    // Between the lines of a train with constant magnitude lies nothing: 100 dB of the observer.
    let map = map();
    let samples = vec![Complex64::new(0.37, 0.0); 25_000];
    let mut fast = scheme(Sampling::Natural, MovedEdges::Two);
    // Seven and a bit instants to a period.
    fast.rate_hz = 137e3;
    let track = track(&fast, &map, &samples, RATE_HZ);
    for at in 1..399 {
        let hz = 1e3 * f64::from(at);
        if at % 137 != 0 {
            let got = line(&track.output_v, hz);
            assert!(got < 2e-5, "{hz}: {got:e}");
        }
    }
}

#[test]
fn more_levels_keep_the_mean_and_shrink_the_steps() {
    let map = map();
    let mut three = scheme(Sampling::Natural, MovedEdges::Two);
    three.levels = 3;
    let two = track(
        &scheme(Sampling::Natural, MovedEdges::Two),
        &map,
        &tone(0.53, 0.4),
        RATE_HZ,
    );
    let three = track(&three, &map, &tone(0.53, 0.4), RATE_HZ);
    // Where the magnitude passes from one ramp to the next, the sidebands of the ramps have a kink and fall only with the
    // square of their number: about 1 / (pi 50^2) of them reaches down to the signal, fifty tones below the ramp.
    for (track, tolerance) in [(&two, 1e-5), (&three, 5e-4)] {
        let mean = line(&track.output_v, 0.0);
        assert!((mean - 0.53).abs() < tolerance, "{mean}");
        assert!((line(&track.output_v, 1e3) - 0.4).abs() < tolerance);
    }
    assert!(
        three
            .gate
            .iter()
            .all(|edge| (2.0 * edge.level).fract() == 0.0)
    );
    let levels = |track: &Track, at: f64| track.gate.iter().any(|edge| edge.level == at);
    assert!(levels(&three, 0.5) && !levels(&two, 0.5));
    // Edges move by one level at a time where the magnitude is slower than the ramp.
    let mut last = 0.0;
    for edge in &three.gate[10..] {
        if last != 0.0 {
            assert!((edge.level - last).abs() < 0.51);
        }
        last = edge.level;
    }
}

/// Power density of the gate over the law of a shaped error, dB, in two bands a decade apart.
fn shaped(order: u32) -> [f64; 2] {
    let map = map();
    let mut shaped = scheme(Sampling::Shaped, MovedEdges::Two);
    shaped.rate_hz = 125e3;
    shaped.order = order;
    shaped.levels = 17;
    // A magnitude that keeps the error busy: tones that share no period with the clock or the windows.
    let count = 1 << 19;
    let samples: Vec<Complex64> = (0..count)
        .map(|n| {
            let t = f64::from(n) / RATE_HZ;
            let m = 0.5
                + 0.2 * (TAU * 11.3 * t).sin()
                + 0.13 * (TAU * 31.7 * t).sin()
                + 0.05 * (TAU * 71.9 * t).sin();
            Complex64::new(m, 0.0)
        })
        .collect();
    let track = track(&shaped, &map, &samples, RATE_HZ);
    let length = 1 << 14;
    let window: Vec<f64> = (0..length)
        .map(|n| 0.5 - 0.5 * (TAU * n as f64 / length as f64).cos())
        .collect();
    let squares: f64 = window.iter().map(|w| w * w).sum();
    [3.05e3, 30.5e3].map(|centre_hz| {
        let (mut power, mut law, mut bins) = (0.0, 0.0, 0);
        let first = (0.8 * centre_hz / RATE_HZ * length as f64) as usize;
        let last = (1.2 * centre_hz / RATE_HZ * length as f64) as usize;
        for bin in (first..last).step_by(((last - first) / 12).max(1)) {
            let hz = bin as f64 * RATE_HZ / length as f64;
            for block in track.output_v.chunks_exact(length).skip(1) {
                let sum: Complex64 = block
                    .iter()
                    .zip(&window)
                    .enumerate()
                    .map(|(n, (v, w))| {
                        let angle = TAU * ((bin * n) % length) as f64 / length as f64;
                        v / 8.0 * w * Complex64::cis(-angle)
                    })
                    .sum();
                power += sum.norm_sqr() / squares / RATE_HZ;
                bins += 1;
                // Steps of 1/16, white error of step^2 / 12 over the clock, shaped, held over a tick.
                let x = hz / 125e3;
                let held = (PI * x).sin() / (PI * x);
                law += (1.0 / 16.0f64).powi(2) / 12.0 / 125e3
                    * (2.0 * (PI * x).sin()).powi(2 * order as i32)
                    * held
                    * held;
            }
        }
        assert!(bins > 200);
        10.0 * (power / law).log10()
    })
}

#[test]
fn shaped_noise_rises_by_twenty_or_forty_db_a_decade() {
    for order in [1, 2] {
        let [low, high] = shaped(order);
        println!("order {order}: {low:+.2} dB and {high:+.2} dB against the law");
        // A thousand correlated bins: some tenths of a dB; the error is not quite white.
        assert!(low.abs() < 1.5 && high.abs() < 1.5, "{order}: {low} {high}");
        assert!((low - high).abs() < 1.5);
    }
}

fn efficiency(scheme: &BurstScheme, duty: f64) -> f64 {
    let map = map();
    let samples = vec![Complex64::new(duty, 0.0); 40_000];
    let track = track(scheme, &map, &samples, RATE_HZ);
    let modulator = Scheme::Burst(scheme.clone()).modulator();
    let mut transmitter = MapTransmitter::new(&map, &modulator, RATE_HZ);
    let mut output_v = Vec::new();
    // Whole periods of 20 instants, the start left out.
    transmitter.push(&track, 10_000..30_000, &mut output_v);
    transmitter.energy().efficiency()
}

#[test]
fn efficiency_follows_the_stated_models() {
    // 8 V into 50 ohm is 0.64 W of 1 W drawn. Unfiltered, output and draw both follow the duty; behind a narrow filter
    // only the mean gets out, duty squared: burnt, duty times the stage's efficiency; returned, all of it.
    let mut burst = scheme(Sampling::Natural, MovedEdges::Two);
    let open = efficiency(&burst, 0.4);
    // Lines above half the rate are not in the output: 0.4 of a period of 20 instants loses 2.6 %.
    assert!((open / 0.64 - 1.0).abs() < 0.03, "{open}");
    let filter = |stop_band| {
        Some(BandFilter {
            shape: BandShape::Butterworth,
            order: 4,
            bandwidth_hz: 10e3,
            loss_db: 0.0,
            stop_band,
        })
    };
    burst.filter = filter(StopBand::Absorbed);
    let absorbed = efficiency(&burst, 0.4);
    assert!((absorbed / (0.4 * 0.64) - 1.0).abs() < 1e-4, "{absorbed}");
    burst.filter = filter(StopBand::Reflected);
    let reflected = efficiency(&burst, 0.4);
    // What stands in front of the filter is counted by its edges, not by what is sampled of it.
    assert!((reflected / 0.64 - 1.0).abs() < 1e-4, "{reflected}");
    if let Some(filter) = &mut burst.filter {
        filter.loss_db = 1.0;
    }
    let lossy = efficiency(&burst, 0.4);
    assert!((lossy / reflected / 10f64.powf(-0.1) - 1.0).abs() < 1e-9);
}

#[test]
fn unequal_transitions_move_the_mean_as_their_areas_do() {
    let map = map();
    let mut slow = scheme(Sampling::Natural, MovedEdges::Two);
    slow.transitions_s = Some((0.2e-6, 0.7e-6));
    let samples = vec![Complex64::new(0.4, 0.0); 25_000];
    let track = track(&slow, &map, &samples, RATE_HZ);
    // One rise and one fall to a period of 20 us.
    let law = 0.4 + (0.7 - 0.2) / 20.0;
    assert!((line(&track.output_v, 0.0) - law).abs() < 1e-5);
}

#[test]
fn a_grid_and_a_shortest_pulse_are_kept() {
    let map = map();
    let mut coarse = scheme(Sampling::Natural, MovedEdges::Two);
    coarse.grid_s = Some(0.3e-6);
    coarse.shortest_s = 2.5e-6;
    let track = track(&coarse, &map, &tone(0.5, 0.499), RATE_HZ);
    let mut last_s = f64::NEG_INFINITY;
    for edge in &track.gate {
        assert!(edge.time_s - last_s >= 2.5e-6 - 1e-12);
        last_s = edge.time_s;
    }
    let mut fine = coarse.clone();
    fine.shortest_s = 0.0;
    for edge in &self::track(&fine, &map, &tone(0.5, 0.499), RATE_HZ).gate {
        let steps = edge.time_s / 0.3e-6;
        assert!((steps - steps.round()).abs() < 1e-6, "{steps}");
    }
}

/// One file in memory.
struct One(&'static str, Vec<u8>);

impl Files for One {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        if name == self.0 {
            return Ok(Box::new(Cursor::new(self.1.clone())));
        }
        Err(io::Error::from(io::ErrorKind::NotFound))
    }
}

fn of_signal(signal: &str) -> PulseOptions {
    PulseOptions {
        signal: Some(signal.to_owned()),
        ..PulseOptions::default()
    }
}

const DUMP: &[u8] = include_bytes!("reference/gate_dump.vcd");

/// What a dump is refused with.
fn refusal(text: &[u8], signal: &str) -> String {
    let files = One("x.vcd", text.to_vec());
    let error: SignalError = read_edges(&files, "x.vcd", &of_signal(signal)).unwrap_err();
    error.to_string()
}

#[test]
fn a_dump_of_a_simulator_is_read() {
    // Icarus Verilog 11.0 on tests/reference/gate_dump.v; the events as a script of its own reads them from the text
    // (tests/reference/gate_dump.py): 32 known values of the gate, the first ones and the last ones in picoseconds.
    let files = One("x.vcd", DUMP.to_vec());
    for name in ["bench.shaper.gate", "bench.gate", "shaper.gate", "gate"] {
        let list = read_edges(&files, "x.vcd", &of_signal(name)).unwrap();
        assert_eq!(list.edges.len(), 32);
        let near = |at: usize, ps: f64, level: f64| {
            let edge = list.edges[at];
            assert!(
                (edge.time_s - ps * 1e-12).abs() < 1e-18 && edge.level == level,
                "{edge:?}"
            );
        };
        near(0, 150_000.0, 0.0);
        near(1, 550_000.0, 1.0);
        near(2, 650_000.0, 0.0);
        near(30, 5_950_000.0, 0.0);
        near(31, 6_050_000.0, 1.0);
        assert!((list.end_s.unwrap() - 6.22e-6).abs() < 1e-15);
    }
    // A vector over its largest number, or over what is stated; a real as it is.
    let wanted = read_edges(&files, "x.vcd", &of_signal("bench.wanted")).unwrap();
    let levels: Vec<f64> = wanted.edges.iter().map(|edge| edge.level).collect();
    assert_eq!(levels, [77.0 / 255.0, 200.0 / 255.0]);
    assert!((wanted.edges[1].time_s - 3.22e-6).abs() < 1e-15);
    let mut scaled = of_signal("bench.wanted");
    scaled.full_scale = Some(256.0);
    assert_eq!(
        read_edges(&files, "x.vcd", &scaled).unwrap().edges[0].level,
        77.0 / 256.0
    );
    scaled.threshold = Some(0.5);
    let split = read_edges(&files, "x.vcd", &scaled).unwrap();
    assert_eq!(
        split.edges.iter().map(|e| e.level).collect::<Vec<_>>(),
        [0.0, 1.0]
    );
    let level = read_edges(&files, "x.vcd", &of_signal("level")).unwrap();
    assert!(
        level
            .edges
            .iter()
            .all(|edge| edge.level == 0.0 || edge.level == 0.5)
    );
}

#[test]
fn wrong_dumps_are_refused_with_their_place() {
    let head = "$timescale 1 ns $end\n$scope module a $end\n$var wire 1 ! g $end\n$var wire 1 \" h $end\n$upscope $end\n$enddefinitions $end\n";
    let with = |body: &str| format!("{head}{body}").into_bytes();
    for (text, signal, parts) in [
        (with("#5\n1!\n#4\n0!\n"), "g", ["x.vcd:9", "time 4 after 5"]),
        (
            with("#5\n1!\n#6\nx!\n"),
            "g",
            ["x.vcd:10", "unknown value (x or z) of a.g"],
        ),
        (with("#5\n1!\n#6\n7!\n"), "g", ["x.vcd:10", "IEEE 1364"]),
        (with("#5\n1!\n"), "i", ["signal \"i\"", "one of a.g, a.h"]),
        (with("#5\n1!\n"), "h", ["no known value of a.h", "changes"]),
        (with("#5\nb1"), "g", ["x.vcd:9", "end of VCD file"]),
        (
            b"$scope module a $end\n".to_vec(),
            "g",
            ["x.vcd", "within the header"],
        ),
        (
            b"$var wire 1 ! g $end\n$enddefinitions $end\n#1\n1!\n".to_vec(),
            "g",
            ["time unit", "$timescale"],
        ),
        (
            b"$timescale 3 ns $end\n".to_vec(),
            "g",
            ["time unit of 3", "1, 10 or 100"],
        ),
        (
            "$scope module a $end\n".repeat(200_000).into_bytes(),
            "g",
            ["x.vcd:1001", "scopes within scopes"],
        ),
        (
            format!("$comment {} $end\n", "x".repeat(3 << 20)).into_bytes(),
            "g",
            ["x.vcd:1", "more than 1048576 bytes"],
        ),
    ] {
        let message = refusal(&text, signal);
        for part in parts {
            assert!(message.contains(part), "{part} is not in: {message}");
        }
    }
    // Without a choice the only signal is meant.
    let files = One("x.vcd", with("#5\n1!\n"));
    let error = read_edges(&files, "x.vcd", &PulseOptions::default()).unwrap_err();
    assert!(
        error.to_string().contains("signal = one of a.g, a.h"),
        "{error}"
    );
    // Levels out of range, in any format.
    let files = One("x.csv", b"time,level\n0,0\n1e-6,1.5\n".to_vec());
    let error = read_edges(&files, "x.csv", &PulseOptions::default()).unwrap_err();
    assert!(
        error
            .to_string()
            .contains("a level of 1.5 at 0.000001 s (edge 1"),
        "{error}"
    );
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(600))]

    /// A dump with bytes changed, left out or cut off is read or refused, and what is read is in order.
    #[test]
    fn spoilt_dumps_never_panic(
        changes in prop::collection::vec((0usize..4453, any::<u8>(), 0u8..3), 1..8),
        cut in 1usize..4454,
    ) {
        let mut bytes = DUMP.to_vec();
        for (at, byte, how) in changes {
            let at = at.min(bytes.len() - 1);
            match how {
                0 => bytes[at] = byte,
                1 => { bytes.remove(at); }
                _ => bytes.insert(at, byte),
            }
        }
        bytes.truncate(cut);
        let files = One("x.vcd", bytes);
        for signal in ["bench.gate", "bench.wanted", "bench.level"] {
            if let Ok(list) = read_edges(&files, "x.vcd", &of_signal(signal)) {
                prop_assert!(list.edges.is_sorted_by(|a, b| a.time_s < b.time_s));
                prop_assert!(list.edges.iter().all(|e| (0.0..=1.0).contains(&e.level)));
            }
        }
    }
}

#[test]
fn a_gate_that_was_written_gates_the_same() {
    let map = map();
    let samples = tone(0.53, 0.4);
    for levels in [2, 3] {
        let mut made = scheme(Sampling::Natural, MovedEdges::Two);
        made.levels = levels;
        let own = track(&made, &map, &samples, RATE_HZ);
        let train = GateTrain {
            figures: GateFigures::default(),
            edges: own.gate.clone(),
        };
        let written = [
            ("x.csv", gate_csv(&train).into_bytes(), 1e-9),
            // A picosecond of a microsecond's instant, at both edges.
            ("x.vcd", gate_vcd(&train).unwrap(), 8.0 * 2e-6),
        ];
        for (name, bytes, tolerance) in written {
            let list = read_edges(&One(name, bytes), name, &PulseOptions::default()).unwrap();
            let mut read = scheme(Sampling::File, MovedEdges::Two);
            read.pulses = Some(PulseFile {
                file: name.to_owned(),
                start_s: 0.0,
                options: PulseOptions::default(),
                sequence: Arc::new(PulseSequence {
                    end_s: list.edges.last().unwrap().time_s,
                    edges: list.edges,
                }),
            });
            let again = track(&read, &map, &samples, RATE_HZ);
            // The last edges of the one are made from magnitudes that the other does not see.
            for (n, (a, b)) in own
                .output_v
                .iter()
                .zip(&again.output_v)
                .enumerate()
                .take(24_900)
            {
                assert!((a - b).norm() < tolerance, "{name} {n}: {a} {b}");
            }
        }
    }
}
