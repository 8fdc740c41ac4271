//! Captures laid against their references: known rates, frequencies and delays are found again.

use std::f64::consts::TAU;

use num_complex::Complex64;
use quietedge::metrics::{PairReader, Reference, Repeat, Sync, synchronize};
use quietedge::signal::{Samples, Source};

/// Numbers without a pattern, -1/2 to 1/2.
struct Draw(u64);

impl Draw {
    fn next(&mut self) -> f64 {
        self.0 = self
            .0
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        (self.0 >> 11) as f64 * 2f64.powi(-53) - 0.5
    }

    /// Complex Gaussian noise of mean square 1.
    fn noise(&mut self) -> Complex64 {
        let radius = (-(self.next() + 0.5).max(1e-300).ln()).sqrt();
        Complex64::from_polar(radius, TAU * self.next())
    }
}

/// A sum of tones, known at every instant: on a grid of `1 / period`, or each somewhere beside it.
struct Tones(Vec<(f64, Complex64)>);

impl Tones {
    fn new(count: i32, period: f64, beside: f64, seed: u64) -> Self {
        let mut draw = Draw(seed);
        let scale = 1.0 / f64::from(2 * count + 1).sqrt();
        Self(
            (-count..=count)
                .map(|k| {
                    let at = f64::from(k) + beside * draw.next();
                    (at / period, scale * draw.noise())
                })
                .collect(),
        )
    }

    fn at(&self, t: f64) -> Complex64 {
        self.0
            .iter()
            .map(|(f, a)| a * Complex64::cis(TAU * (f * t).fract()))
            .sum()
    }

    fn power(&self) -> f64 {
        self.0.iter().map(|(_, a)| a.norm_sqr()).sum()
    }
}

struct Case {
    reference_hz: f64,
    capture_hz: f64,
    reference_samples: usize,
    capture_samples: usize,
    delay_s: f64,
    rate_error: f64,
    frequency_hz: f64,
    snr_db: f64,
    repeat: Repeat,
}

/// Tones to +/-60 kHz; a signal that repeats has a period of 1 ms.
fn found(case: &Case, seed: u64) -> (Sync, f64) {
    let beside = if case.repeat == Repeat::Yes { 0.0 } else { 0.9 };
    let tones = Tones::new(60, 1e-3, beside, 5);
    let reference: Vec<_> = (0..case.reference_samples)
        .map(|n| tones.at(n as f64 / case.reference_hz))
        .collect();
    let mut draw = Draw(seed);
    let sigma = (tones.power() * 10f64.powf(-case.snr_db / 10.0)).sqrt();
    let gain = Complex64::from_polar(0.3, 1.1);
    let span_s = case.reference_samples as f64 / case.reference_hz;
    let middle_s = (case.capture_samples as f64 - 1.0) / case.capture_hz / 2.0;
    let capture: Vec<_> = (0..case.capture_samples)
        .map(|n| {
            let t = n as f64 / case.capture_hz;
            let u = t * (1.0 + case.rate_error) - case.delay_s;
            let inside = case.repeat != Repeat::No || (0.0..span_s).contains(&u);
            let turn = Complex64::cis(TAU * (case.frequency_hz * (t - middle_s)).fract());
            let x = if inside { tones.at(u) } else { Complex64::ZERO };
            gain * (x * turn + sigma * draw.noise())
        })
        .collect();
    let mut capture = Samples::new(case.capture_hz, capture);
    let mut reference = Samples::new(case.reference_hz, reference);
    let sync = synchronize(&mut capture, &mut reference, case.repeat)
        .unwrap_or_else(|error| panic!("{error}"));

    // The rest after everything is taken off, against the noise.
    let samples = case.reference_samples as u64;
    let looped = case.repeat == Repeat::Yes;
    let mut again = Reference::again(&mut reference, samples, looped, capture.rate_hz());
    let mut reader = PairReader::of(&mut capture, &mut again, &sync).unwrap();
    let (mut x, mut y) = (Vec::new(), Vec::new());
    let (mut xx, mut yy, mut xy) = (0.0, 0.0, Complex64::ZERO);
    while reader.read(&mut x, &mut y).unwrap() > 0 {
        for (x, y) in x.iter().zip(&y) {
            xx += x.norm_sqr();
            yy += y.norm_sqr();
            xy += x.conj() * y;
        }
    }
    let rest = 10.0 * ((yy - xy.norm_sqr() / xx) / yy).log10();
    (sync, rest)
}

const PLAIN: Case = Case {
    reference_hz: 1e6,
    capture_hz: 1e6,
    reference_samples: 100_000,
    capture_samples: 100_000,
    delay_s: 0.0,
    rate_error: 0.0,
    frequency_hz: 0.0,
    snr_db: 40.0,
    repeat: Repeat::No,
};

#[test]
fn a_delay_is_found_to_a_thousandth_of_a_sample() {
    for (seed, delay) in [(1, 0.0), (2, 17.25), (3, -123.456)] {
        let case = Case {
            delay_s: delay * 1e-6,
            ..PLAIN
        };
        let (sync, rest) = found(&case, seed);
        let error = sync.delay_s * 1e6 - delay;
        assert!(error.abs() < 1e-3, "{delay}: {error:e} samples");
        assert!((rest + 40.0).abs() < 0.2, "{rest} dB");
    }
}

#[test]
fn rates_frequencies_and_delays_are_found_together() {
    for (seed, reference_hz, capture_hz, rate_error, frequency_hz, delay_s) in [
        (11, 1e6, 1e6, 20e-6, 12_345.6, 1.234e-3),
        (12, 1e6, 1.5e6, -7e-6, -310.25, -0.4e-3),
        (13, 1e6, 1e6 * 2f64.sqrt(), 3e-6, 57.0, 2e-3),
        (14, 2e6, 0.61e6, 0.0, 20_000.0, 0.0),
    ] {
        let case = Case {
            reference_hz,
            capture_hz,
            rate_error,
            frequency_hz,
            delay_s,
            reference_samples: (0.1 * reference_hz) as usize,
            capture_samples: (0.11 * capture_hz) as usize,
            ..PLAIN
        };
        let (sync, rest) = found(&case, seed);
        assert!((sync.delay_s - delay_s).abs() < 2e-9, "{sync:?}");
        assert!((sync.rate_error - rate_error).abs() < 2e-8, "{sync:?}");
        assert!((sync.frequency_hz - frequency_hz).abs() < 0.01, "{sync:?}");
        assert!((rest + 40.0).abs() < 0.3, "{rest} dB");
    }
}

#[test]
fn a_reference_that_repeats_is_followed_through_its_seams() {
    let case = Case {
        reference_samples: 1000,
        capture_samples: 60_000,
        delay_s: 0.3217e-3,
        rate_error: 11e-6,
        frequency_hz: 4321.0,
        repeat: Repeat::Yes,
        ..PLAIN
    };
    let (sync, rest) = found(&case, 21);
    assert!((sync.delay_s - case.delay_s).abs() < 2e-9, "{sync:?}");
    assert!((rest + 40.0).abs() < 0.3, "{rest} dB");
    assert_eq!((sync.from, sync.to), (0, 60_000));
}

/// The bound for a tone whose phase is unknown too: `var f >= 6 fs^2 / ((2 pi)^2 SNR N (N^2 - 1))`
/// (D. C. Rife, R. R. Boorstyn, IEEE Trans. Inf. Theory, September 1974); with a known signal in place of the
/// tone the SNR is the signal's. It holds for fixed amplitude; energy that wanders moves it by a few percent.
#[test]
fn the_frequency_meets_the_bound_within_a_factor_of_two() {
    let (samples, snr_db) = (8192, 10.0);
    let mut square = 0.0;
    let trials = 24;
    let mut stated = 0.0;
    for seed in 0..trials {
        let case = Case {
            reference_samples: samples,
            capture_samples: samples,
            frequency_hz: 777.7,
            snr_db,
            ..PLAIN
        };
        let (sync, _) = found(&case, 100 + seed);
        square += (sync.frequency_hz - case.frequency_hz).powi(2);
        stated += sync.frequency_deviation_hz / trials as f64;
    }
    let n = samples as f64;
    let snr = 10f64.powf(snr_db / 10.0);
    let bound_hz = 1e6 * (6.0 / (TAU * TAU * snr * n * (n * n - 1.0))).sqrt();
    let deviation_hz = (square / trials as f64).sqrt();
    println!("bound {bound_hz} Hz, found {deviation_hz} Hz, stated {stated} Hz");
    // 24 trials know a deviation to 15 %.
    assert!(
        deviation_hz < 2.0 * bound_hz,
        "{deviation_hz} against {bound_hz} Hz"
    );
    assert!(
        (0.5..2.0).contains(&(stated / bound_hz)),
        "{stated} against {bound_hz} Hz"
    );
}
