//! Tables from captured pairs: the chain with noise, memory, delay and a frequency offset stands in for the lab.

use std::f64::consts::TAU;
use std::process::Command;

use num_complex::Complex64;
use quietedge::drive::{
    Correction, LookupSize, Modulator, PhasePath, Scheme, Shape, Shaping, SupplyScheme, Track,
};
use quietedge::limits::Limits;
use quietedge::map::{Control, Map};
use quietedge::math::Window;
use quietedge::math::delay::Delay;
use quietedge::metrics::Repeat;
use quietedge::predistort::{
    EntryState, LoopEnd, NextRequest, StoppedBy, Table, TableRequest, json, read_table,
};
use quietedge::signal::{Oversampled, Samples, Source};
use quietedge::stage::Anchor;
use quietedge::study::{ClosedRequest, ClosedResult, MeasureRequest, Scale, next_from_capture};
use quietedge::transmit::MapTransmitter;

use super::map_of;

const FULL_V: f64 = 8.0;
const RATE_HZ: f64 = 1e6;
const FACTOR: usize = 8;

/// `a = 1.3 u - 0.3 u^2` of full output, phase `0.6 u^2` rad.
fn bent(u: f64) -> Complex64 {
    Complex64::from_polar(20.0 * (1.3 * u - 0.3 * u * u), 0.6 * u * u)
}

/// Tones within +/- 0.1 of the rate with scattered phases; highest magnitude 1.
fn signal() -> Vec<Complex64> {
    let mut samples: Vec<Complex64> = (0..12_000)
        .map(|n| {
            let tone = |k: i32| {
                let phase = f64::from(k * k) * 0.734 + f64::from(k * k * k) * 0.171;
                let cycles = f64::from(k) / 300.0 + 1.3e-6 * f64::from(k * k);
                Complex64::cis(TAU * cycles * f64::from(n) + phase)
            };
            (-30..=30).map(tone).sum()
        })
        .collect();
    let peak = samples.iter().map(|x| x.norm()).fold(0.0, f64::max);
    samples.iter_mut().for_each(|x| *x /= peak);
    samples
}

/// What stands between the front end and the captured file.
#[derive(Debug, Clone, Copy)]
struct Lab {
    /// RMS of the noise, over full output.
    noise: f64,
    /// An echo two samples of the capture later.
    echo: Complex64,
    floor: f64,
    level: f64,
    /// Part of the samples that interference hits.
    hit: f64,
}

const CLEAN: Lab = Lab {
    noise: 0.0,
    echo: Complex64::ZERO,
    floor: 0.0,
    level: 1.0,
    hit: 0.0,
};

fn shaping(floor: f64) -> Shaping {
    Shaping {
        shape: Shape::Exponential,
        floor,
    }
}

fn draw(state: &mut u64) -> f64 {
    *state = state
        .wrapping_mul(6_364_136_223_846_793_005)
        .wrapping_add(1_442_695_040_888_963_407);
    ((*state >> 11) as f64 + 0.5) * 2f64.powi(-53)
}

impl Lab {
    /// The capture behind `table`: at eight times the signal's rate, late by 37.3 samples, 2.345 kHz off, turned.
    fn capture(&self, map: &Map, table: Option<&Table>, seed: u64) -> Samples {
        let scheme = Scheme::Supply(SupplyScheme {
            shaping: shaping(self.floor),
            modulator: Modulator::default(),
            phase_path: PhasePath::default(),
        });
        let rate_hz = FACTOR as f64 * RATE_HZ;
        let mut source = Samples::new(RATE_HZ, signal());
        let mut oversampled = Oversampled::new(&mut source, FACTOR).expect("a factor");
        let mut wanted = vec![Complex64::ZERO; FACTOR * 12_000];
        let count = oversampled.read(&mut wanted).expect("samples");
        wanted.truncate(count);
        let mut drive = scheme.drive(map, Anchor::Centre, self.level, FULL_V, rate_hz);
        if let Some(table) = table {
            drive = drive.corrected(&Correction::Table(table.lookup.clone()), FACTOR);
        }
        let (mut track, mut output) = (Track::default(), Vec::new());
        drive.push(&wanted, &mut track);
        let mut transmitter = MapTransmitter::new(map, &scheme.modulator(), rate_hz);
        transmitter.push(&track, 0..track.len(), &mut output);
        let mut late = Delay::new(37.3);
        let mut state = seed;
        let gain = Complex64::from_polar(0.03, 1.1);
        let samples = (0..output.len())
            .map(|n| {
                let past = n.checked_sub(2).map_or(Complex64::ZERO, |n| output[n]);
                let sample = late.push(output[n] + self.echo * past);
                let turned = sample * Complex64::cis(TAU * 2345.0 / rate_hz * n as f64);
                // Box and Muller.
                let radius = (-draw(&mut state).ln()).sqrt();
                let noise =
                    Complex64::from_polar(20.0 * self.noise * radius, TAU * draw(&mut state));
                let hit = if draw(&mut state) < self.hit {
                    9.0
                } else {
                    0.0
                };
                gain * (turned + noise + hit)
            })
            .collect();
        Samples::new(rate_hz, samples)
    }

    fn request(&self, size: LookupSize, damping: f64) -> ClosedRequest {
        ClosedRequest {
            measure: MeasureRequest {
                file: "received".to_owned(),
                reference: Some("sent".to_owned()),
                repeat: Repeat::No,
                limits: Limits {
                    channel_hz: Some(220e3),
                    evm_percent: Some(1.0),
                    ..Limits::default()
                },
                scale: Scale::Unknown,
                window: Window::BlackmanHarris,
                resolution_hz: None,
                format: None,
                band_hz: None,
            },
            level: self.level,
            previous: None,
            next: NextRequest {
                table: TableRequest {
                    size,
                    rate: FACTOR,
                    ..TableRequest::default()
                },
                shaping: shaping(self.floor),
                damping,
                full_control: FULL_V,
                control: Control::Supply,
                title: "lab".to_owned(),
            },
        }
    }

    fn pass(&self, map: &Map, size: LookupSize, table: Option<&Table>, seed: u64) -> ClosedResult {
        let damping = if table.is_some() { 0.7 } else { 1.0 };
        let mut capture = self.capture(map, table, seed);
        let mut sent = Samples::new(RATE_HZ, signal());
        let request = self.request(size, damping);
        next_from_capture(&request, table, &mut capture, &mut sent, &mut |_| {})
            .unwrap_or_else(|error| panic!("{error}"))
    }
}

const SIZE: LookupSize = LookupSize {
    depth: 256,
    address_bits: 16,
    amplitude_bits: 12,
    phase_bits: 12,
};

#[test]
fn iterating_with_noise_and_memory_converges_and_says_when_it_stops_helping() {
    let map = map_of(FULL_V, 401, bent);
    let lab = Lab {
        noise: 2e-3,
        echo: Complex64::new(0.004, 0.003),
        ..CLEAN
    };
    let mut results: Vec<ClosedResult> = Vec::new();
    for seed in 1..=6 {
        let table = results.last().map(|result| result.next.table.clone());
        let result = lab.pass(&map, SIZE, table.as_ref(), seed);
        let helps = result.end.helps();
        println!(
            "{:?} seen {:?}, left out {:.5}, {:.2} {:.2} {:.2}, before {:.2} expected {:.2}",
            result.end,
            result.next.stage.seen,
            result.fit.left_out,
            result.fit.linear_rest_db,
            result.fit.static_rest_db,
            result.next.rounding_db,
            result.before.linear_rest_db,
            result.expected.linear_rest_db
        );
        results.push(result);
        if !helps {
            break;
        }
    }
    let last = &results[results.len() - 1];
    assert!((2..=4).contains(&results.len()), "{} passes", results.len());
    assert!(matches!(
        last.end,
        LoopEnd::StoppedHelping {
            by: StoppedBy::Spread,
            ..
        }
    ));
    // The noise is known: the table ends within a fifth of a decibel of it and of what the echo leaves.
    let (first, last_fit) = (&results[0].fit, &last.fit);
    assert!(first.linear_rest_db > -30.0, "{}", first.linear_rest_db);
    assert!(last_fit.linear_rest_db - last_fit.static_rest_db < 0.15);
    assert!(last_fit.linear_rest_db < first.linear_rest_db - 10.0);
    // What was expected of the first table came true.
    let expected = results[0].expected.linear_rest_db;
    assert!(
        (results[1].before.linear_rest_db - expected).abs() < 0.5,
        "{expected} {}",
        results[1].before.linear_rest_db
    );
    assert_eq!(last.next.table.passes.len(), results.len());
    // Margins: the EVM limit of 1 % is broken before and kept after.
    let margin = |result: &ClosedResult| {
        let checks = &result.before.judgement.verdict.checks;
        checks
            .iter()
            .find(|check| check.name == "evm")
            .and_then(|check| check.margin_db)
    };
    assert!(
        margin(&results[0]) < Some(0.0) && margin(last) > Some(0.0),
        "{:?}",
        last.before.judgement.verdict.checks
    );
}

#[test]
fn a_table_from_a_capture_is_that_of_the_map_within_its_noise() {
    let map = map_of(FULL_V, 4001, bent);
    for (noise, hit) in [(0.0, 0.0), (5e-3, 0.0), (5e-3, 0.02)] {
        let lab = Lab {
            noise,
            hit,
            ..CLEAN
        };
        let result = lab.pass(&map, SIZE, None, 9);
        let table = &result.next.table;
        let (low, high) = result.next.stage.seen;
        let seen: Vec<_> = table
            .entries
            .iter()
            .filter(|entry| entry.magnitude > low && entry.magnitude < high)
            .collect();
        // The signal's last peaks are too few samples for a cell.
        assert!(seen.len() > 235, "{}", seen.len());
        // Behind the table the output is a straight line of the magnitude: gain by least squares.
        let through = |m: f64, u: f64, p: f64| (m, bent(u) / 20.0 * Complex64::cis(p));
        let pairs: Vec<_> = seen
            .iter()
            .map(|entry| through(entry.magnitude, entry.control, entry.phase_rad))
            .collect();
        let gain = pairs.iter().map(|(m, y)| m * y).sum::<Complex64>()
            / pairs.iter().map(|(m, _)| m * m).sum::<f64>();
        // A cell of 96000 / 128 samples on average knows its mean to noise / sqrt(750); cells near both ends hold
        // fewer, down to 8. Half a step of the words where there is no noise.
        let cell = |m: f64| {
            let points = &result.fit.points;
            let nearest = points
                .iter()
                .min_by(|a, b| (a.magnitude - m).abs().total_cmp(&(b.magnitude - m).abs()));
            nearest.map_or(8.0, |point| point.samples as f64)
        };
        println!(
            "static rest {:.2}, {:?}",
            result.fit.static_rest_db, result.sync
        );
        let mut worst: f64 = 0.0;
        for (m, y) in &pairs {
            // Five deviations of two neighbouring cells, and the curve's bend within a cell.
            let allowed = 5.0 * noise * (2.0 / cell(*m)).sqrt() + 2e-4;
            let off = (y - gain * m).norm();
            worst = worst.max(off / allowed);
            assert!(
                off < allowed,
                "{noise} {hit}: {m} is off by {off}, {allowed} allowed"
            );
        }
        println!(
            "{noise} {hit}: worst {worst:.2} of what is allowed, left out {:.4}",
            result.fit.left_out
        );
        assert!(
            noise == 0.0 || (result.fit.left_out - hit).abs() < 0.002,
            "{}",
            result.fit.left_out
        );
    }
}

#[test]
fn without_noise_the_words_are_what_stops_it() {
    let map = map_of(FULL_V, 401, bent);
    let coarse = LookupSize {
        amplitude_bits: 7,
        phase_bits: 8,
        ..SIZE
    };
    let first = CLEAN.pass(&map, coarse, None, 1);
    assert!(first.end.helps());
    let second = CLEAN.pass(&map, coarse, Some(&first.next.table), 1);
    println!(
        "{:?} {} {} {}",
        second.end, second.fit.linear_rest_db, second.fit.static_rest_db, second.next.rounding_db
    );
    assert!(!second.end.helps(), "{:?}", second.end);
    // Rounding by its formula and as it came out of the chain.
    assert!((second.fit.linear_rest_db - second.next.rounding_db).abs() < 2.0);
}

#[test]
fn a_front_end_that_ignores_its_table_is_found_out() {
    let map = map_of(FULL_V, 401, bent);
    let lab = Lab {
        noise: 1e-3,
        ..CLEAN
    };
    let first = lab.pass(&map, SIZE, None, 1);
    let mut capture = lab.capture(&map, None, 2);
    let mut sent = Samples::new(RATE_HZ, signal());
    let request = lab.request(SIZE, 0.7);
    let table = &first.next.table;
    let second = next_from_capture(&request, Some(table), &mut capture, &mut sent, &mut |_| {})
        .expect("a pass");
    assert!(matches!(
        second.end,
        LoopEnd::StoppedHelping {
            by: StoppedBy::NoProgress,
            ..
        }
    ));
}

#[test]
fn a_floor_is_kept_and_magnitudes_not_seen_follow_the_table_before() {
    let map = map_of(FULL_V, 401, bent);
    let lab = Lab {
        floor: 0.08,
        level: 0.6,
        noise: 1e-3,
        ..CLEAN
    };
    let first = lab.pass(&map, SIZE, None, 1);
    let entries = &first.next.table.entries;
    assert!(entries.iter().all(|entry| entry.control >= 0.08 - 1e-12));
    let not_seen: Vec<_> = entries
        .iter()
        .filter(|entry| entry.state == EntryState::NotSeen)
        .collect();
    assert!(not_seen.len() > 90, "{}", not_seen.len());
    // Without a jump, straight on: what is in force above 0.6 is the magnitude itself.
    for entry in not_seen.iter().filter(|entry| entry.magnitude > 0.7) {
        assert!((entry.control - entry.magnitude).abs() < 0.02, "{entry:?}");
    }
    for pair in entries.windows(2) {
        assert!((pair[1].control - pair[0].control).abs() < 0.02, "{pair:?}");
    }
    let second = lab.pass(&map, SIZE, Some(&first.next.table), 2);
    assert!(second.fit.linear_rest_db <= first.fit.linear_rest_db + 0.01);

    // Another full range than the table's is refused.
    let mut request = lab.request(SIZE, 0.7);
    request.next.full_control = 5.0;
    let mut capture = lab.capture(&map, None, 2);
    let mut sent = Samples::new(RATE_HZ, signal());
    let table = Some(&first.next.table);
    let refused = next_from_capture(&request, table, &mut capture, &mut sent, &mut |_| {});
    assert!(
        refused
            .expect_err("another range")
            .to_string()
            .contains("8 V")
    );

    // The file holds the passes.
    let text = serde_json::to_vec(&json(&first.next.table)).expect("JSON");
    let again = read_table("table.json", &text[..]).expect("a table");
    assert_eq!(again.passes, first.next.table.passes);
    assert_eq!(again.lookup, first.next.table.lookup);
}

#[test]
fn the_command_makes_table_after_table() {
    let folder = tempfile::tempdir().expect("a folder");
    let map = map_of(FULL_V, 401, bent);
    let lab = Lab {
        noise: 2e-3,
        ..CLEAN
    };
    let write = |name: &str, samples: &[Complex64]| {
        let bytes: Vec<u8> = samples
            .iter()
            .flat_map(|x| [(x.re as f32).to_le_bytes(), (x.im as f32).to_le_bytes()])
            .flatten()
            .collect();
        std::fs::write(folder.path().join(name), bytes).expect("written");
    };
    let read = |mut source: Samples| {
        let mut samples = vec![Complex64::ZERO; FACTOR * 12_000];
        let count = source.read(&mut samples).expect("samples");
        samples.truncate(count);
        samples
    };
    write("sent.cf32", &signal());
    let run = |arguments: &[&str]| {
        Command::new(env!("CARGO_BIN_EXE_quietedge"))
            .args(arguments)
            .current_dir(folder.path())
            .output()
            .expect("the program runs")
    };
    let rates = [
        "--sent-rate",
        "1 MHz",
        "--received-rate",
        "8 MHz",
        "--rate",
        "8",
    ];
    write("received1.cf32", &read(lab.capture(&map, None, 1)));
    let mut arguments = vec![
        "predistort",
        "--from-capture",
        "sent.cf32",
        "received1.cf32",
    ];
    arguments.extend(rates);
    arguments.extend(["--full-control", "8 V", "--out", "pass1"]);
    let first = run(&arguments);
    assert_eq!(
        first.status.code(),
        Some(0),
        "{}",
        String::from_utf8_lossy(&first.stderr)
    );
    assert!(String::from_utf8_lossy(&first.stdout).starts_with("HELPS"));
    let text = std::fs::read(folder.path().join("pass1/table.json")).expect("a table");
    let table = read_table("table.json", &text[..]).expect("a table");
    write("received2.cf32", &read(lab.capture(&map, Some(&table), 2)));
    let mut arguments = vec![
        "predistort",
        "--from-capture",
        "sent.cf32",
        "received2.cf32",
    ];
    arguments.extend(&rates[..4]);
    arguments.extend(["--previous", "pass1/table.json", "--out", "pass2", "--json"]);
    let second = run(&arguments);
    assert_eq!(
        second.status.code(),
        Some(1),
        "{}",
        String::from_utf8_lossy(&second.stderr)
    );
    let document: serde_json::Value = serde_json::from_slice(&second.stdout).expect("one document");
    assert_eq!(document["helps"], false);
    assert_eq!(document["end"]["by"], "spread");
    assert_eq!(document["passes"].as_array().map(Vec::len), Some(2));
    for name in [
        "report.html",
        "result.json",
        "spectrum.png",
        "table.csv",
        "table.hex",
        "table.h",
        "table.npy",
        "table.png",
    ] {
        assert!(folder.path().join("pass2").join(name).exists(), "{name}");
    }
    for wrong in [
        vec!["predistort"],
        vec!["predistort", "--from-capture", "sent.cf32"],
        vec![
            "predistort",
            "--from-capture",
            "sent.cf32",
            "received1.cf32",
            "--search",
        ],
        vec![
            "predistort",
            "--from-capture",
            "sent.cf32",
            "received1.cf32",
            "--sent-rate",
            "1 MHz",
            "--received-rate",
            "8 MHz",
            "--damping",
            "2",
        ],
    ] {
        assert_eq!(run(&wrong).status.code(), Some(2), "{wrong:?}");
    }
}
