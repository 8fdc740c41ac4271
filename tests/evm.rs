//! Alignment and EVM against errors that were put in.

use num_complex::Complex64;
use proptest::prelude::*;
use quietedge::metrics::{Alignment, AlignmentMeter, ErrorFigures, ErrorMeter, PairError};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use std::f64::consts::TAU;

const RATE_HZ: f64 = 1e6;

/// A sum of tones, known at every instant: it can be delayed exactly by any time.
struct Tones(Vec<(f64, Complex64)>);

impl Tones {
    /// `count` tones of random frequency within `reach` (cycles a sample) of the carrier, unit mean square.
    fn random(count: usize, reach: f64, seed: u64) -> Self {
        let mut random = ChaCha8Rng::seed_from_u64(seed);
        let amplitude = 1.0 / (count as f64).sqrt();
        let mut tone = || {
            let frequency = reach * (2.0 * random.random::<f64>() - 1.0);
            let phase = Complex64::cis(TAU * random.random::<f64>());
            (frequency, amplitude * phase)
        };
        Self((0..count).map(|_| tone()).collect())
    }

    fn samples(&self, length: usize, delay: f64) -> Vec<Complex64> {
        let mut sum = vec![Complex64::ZERO; length];
        for &(frequency, amplitude) in &self.0 {
            let step = Complex64::cis(TAU * frequency);
            let mut value = amplitude * Complex64::cis(-TAU * frequency * delay);
            for (index, sample) in sum.iter_mut().enumerate() {
                // A rotation of each sample drifts by rounding: start afresh now and then.
                if index % 4096 == 0 {
                    value = amplitude * Complex64::cis(TAU * frequency * (index as f64 - delay));
                }
                *sample += value;
                value *= step;
            }
        }
        sum
    }
}

fn gauss(random: &mut ChaCha8Rng) -> Complex64 {
    let (re, im): (f64, f64) = (StandardNormal.sample(random), StandardNormal.sample(random));
    Complex64::new(re, im) * 0.5_f64.sqrt()
}

fn aligned(x: &[Complex64], y: &[Complex64], max_delay_s: f64) -> Result<Alignment, PairError> {
    let mut meter = AlignmentMeter::new(RATE_HZ, max_delay_s)?;
    // Uneven pieces, as files give them.
    for (x, y) in x.chunks(3001).zip(y.chunks(3001)) {
        meter.push(x, y)?;
    }
    meter.finish()
}

fn compared(
    x: &[Complex64],
    y: &[Complex64],
    max_delay_s: f64,
    band_hz: Option<f64>,
) -> (Alignment, ErrorFigures) {
    let alignment = aligned(x, y, max_delay_s).unwrap_or_else(|error| panic!("{error}"));
    let figures = (|| {
        let mut meter = ErrorMeter::new(alignment, RATE_HZ, band_hz)?;
        for (x, y) in x.chunks(3001).zip(y.chunks(3001)) {
            meter.push(x, y)?;
        }
        meter.finish()
    })();
    (
        alignment,
        figures.unwrap_or_else(|error: PairError| panic!("{error}")),
    )
}

#[test]
fn a_delayed_copy_leaves_next_to_nothing() {
    for (reach, length, delay) in [
        (0.4, 4_000, 0.37),
        (0.4, 40_000, -17.81),
        (0.2, 10_000, 3.5),
        (0.05, 30_000, 123.456),
        (0.02, 60_000, -0.003),
        (0.45, 100_000, 499.9999),
    ] {
        let tones = Tones::random(60, reach, 11);
        let x = tones.samples(length, 0.0);
        let gain = Complex64::from_polar(3.7, 2.1);
        let y: Vec<_> = tones
            .samples(length, delay)
            .iter()
            .map(|y| y * gain)
            .collect();
        let (alignment, figures) = compared(&x, &y, 500e-6, None);
        let error = alignment.delay_s * RATE_HZ - delay;
        println!(
            "reach {reach} length {length} delay {delay}: error {error:.1e} samples, NMSE {:.1} dB",
            figures.nmse_db
        );
        // The interpolations are right to -120 dB up to 0.48 of the rate; a bias of the delay by the ends
        // of the streams would be 1e-5 samples and more.
        assert!(error.abs() < 1e-8, "{error}");
        assert!((alignment.gain / gain - 1.0).norm() < 1e-6);
        assert!(figures.nmse_db < -120.0, "{}", figures.nmse_db);
        assert!(figures.left_out as f64 >= 256.0 + delay.abs() - 1.0);
        assert_eq!(figures.samples + figures.left_out, length as u64);
    }
}

/// Gaussian phase noise of `sigma` rad, independent from sample to sample: the mean rotation is
/// `exp(-sigma^2 / 2)`, so `|y / g - x|^2 / |x|^2 = exp(sigma^2) - 1`.
///
/// Tolerance: the mean square of n independent errors of nearly Gaussian spread, weighted with the
/// powers of x (fourth moment at most 2), scatters by sqrt(2 * 2 / n) relative, its root by half of
/// that; four of these.
#[test]
fn phase_noise_reads_its_spread() {
    let length = 50_000;
    let tones = Tones::random(40, 0.1, 3);
    let x = tones.samples(length, 0.0);
    let late = tones.samples(length, 5.3);
    let mut random = ChaCha8Rng::seed_from_u64(5);
    for sigma in [0.01, 0.05, 0.2] {
        let y: Vec<_> = late
            .iter()
            .map(|y| {
                let angle: f64 = StandardNormal.sample(&mut random);
                y * Complex64::from_polar(0.2, 1.0 + sigma * angle)
            })
            .collect();
        let (_, figures) = compared(&x, &y, 50e-6, None);
        let expected = 100.0 * ((sigma * sigma).exp() - 1.0).sqrt();
        let tolerance = 4.0 * (1.0 / length as f64).sqrt();
        let error = figures.evm_percent / expected - 1.0;
        assert!(error.abs() < tolerance, "{sigma}: {error} {tolerance}");
        assert!((20.0 * (figures.evm_percent / 100.0).log10() - figures.nmse_db).abs() < 1e-9);
        assert!(figures.evm_peak_percent > 2.0 * figures.evm_percent);
    }
}

/// White noise at -30 dB in all of the sampled band: the band's filter passes the part `width` of it
/// and all of the signal.
///
/// Tolerance: the noise in the band has width * n independent values, its root mean square scatters by
/// 1 / (2 sqrt(width n)); four of these, and the filter's noise bandwidth, which its transition
/// (0.1 of the width, not quite symmetric in power) makes smaller by up to 0.025 of the width.
#[test]
fn noise_in_the_band_counts_and_noise_outside_does_not() {
    let length = 60_000;
    let tones = Tones::random(40, 0.05, 8);
    let x = tones.samples(length, 0.0);
    let mut random = ChaCha8Rng::seed_from_u64(6);
    let y: Vec<_> = tones
        .samples(length, -2.6)
        .iter()
        .map(|y| 4.0 * (y + 10_f64.powf(-30.0 / 20.0) * gauss(&mut random)))
        .collect();
    let (_, all) = compared(&x, &y, 20e-6, None);
    let scatter = 4.0 * 0.5 / (length as f64).sqrt();
    let expected = 100.0 * 10_f64.powf(-30.0 / 20.0);
    // The advance filter takes away up to 0.02 of the noise near half the sample rate.
    assert!(all.evm_percent / expected - 1.0 < scatter);
    assert!(all.evm_percent / expected - 1.0 > -scatter - 0.01);
    let width = 0.12;
    let (_, band) = compared(&x, &y, 20e-6, Some(width * RATE_HZ));
    let scatter = 4.0 * 0.5 / (length as f64 * width).sqrt();
    let error = band.evm_percent / (expected * width.sqrt()) - 1.0;
    assert!(error.abs() < scatter + 0.0125, "{error} {scatter}");
    assert_eq!(band.band_hz, Some(width * RATE_HZ));
    assert!((band.nmse_db - all.nmse_db).abs() < 0.1);
}

/// A spurious line of 1 % in the band counts, one of 10 % outside does not.
#[test]
fn a_line_outside_the_band_is_not_counted() {
    let length = 40_000;
    let x = Tones::random(40, 0.04, 31).samples(length, 0.0);
    let lines = Tones(vec![
        (0.05, Complex64::from(0.01)),
        (0.2, Complex64::from(0.1)),
    ]);
    let lines = lines.samples(length, 0.0);
    let y: Vec<_> = x.iter().zip(&lines).map(|(x, line)| x + line).collect();
    let (_, figures) = compared(&x, &y, 10e-6, Some(0.12 * RATE_HZ));
    // The tones' mean square over a finite span: 2 %; the filter keeps 1e-4 of the outer line.
    assert!((figures.evm_percent - 1.0).abs() < 0.02, "{figures:?}");
    assert!((figures.evm_peak_percent - 1.0).abs() < 0.05, "{figures:?}");
    assert!(
        (figures.nmse_db - 10.0 * 0.0101_f64.log10()).abs() < 0.2,
        "{figures:?}"
    );
}

/// How the streams are cut into pieces changes nothing.
#[test]
fn pieces_do_not_matter() {
    let tones = Tones::random(30, 0.1, 12);
    let x = tones.samples(70_000, 0.0);
    let y: Vec<_> = tones
        .samples(70_000, 7.7)
        .iter()
        .map(|y| y * (1.0 - 0.1 * y.norm_sqr()))
        .collect();
    let (alignment, figures) = compared(&x, &y, 30e-6, Some(0.3e6));
    let mut align = AlignmentMeter::new(RATE_HZ, 30e-6).unwrap_or_else(|e| panic!("{e}"));
    align.push(&x, &y).unwrap_or_else(|e| panic!("{e}"));
    assert_eq!(align.finish(), Ok(alignment));
    let meter = ErrorMeter::new(alignment, RATE_HZ, Some(0.3e6));
    let mut meter = meter.unwrap_or_else(|e| panic!("{e}"));
    meter.push(&x, &y).unwrap_or_else(|e| panic!("{e}"));
    assert_eq!(meter.finish(), Ok(figures));
}

/// A delay error reads `2 pi f_rms tau`: here the second pass is handed a wrong delay on purpose.
#[test]
fn a_wrong_delay_reads_its_phase_slope() {
    let length = 30_000;
    let tones = Tones::random(50, 0.05, 21);
    let x = tones.samples(length, 0.0);
    let (alignment, _) = compared(&x, &x, 0.0, None);
    assert!(alignment.delay_s.abs() * RATE_HZ < 1e-6);
    let wrong = Alignment {
        delay_s: 0.1 / RATE_HZ,
        ..alignment
    };
    let mut meter = ErrorMeter::new(wrong, RATE_HZ, None).unwrap_or_else(|e| panic!("{e}"));
    meter.push(&x, &x).unwrap_or_else(|e| panic!("{e}"));
    let figures = meter.finish().unwrap_or_else(|e| panic!("{e}"));
    // The gain takes the mean frequency off; what is left is the spread about it.
    let mean = tones.0.iter().map(|tone| tone.0).sum::<f64>() / tones.0.len() as f64;
    let square = tones
        .0
        .iter()
        .map(|tone| (tone.0 - mean).powi(2))
        .sum::<f64>();
    let spread = (square / tones.0.len() as f64).sqrt();
    let expected = 100.0 * TAU * spread * 0.1;
    // The tones' powers over a finite span are not exactly equal: 2 %.
    assert!((figures.evm_percent / expected - 1.0).abs() < 0.02);
}

#[test]
fn a_cubic_leaves_its_uncorrelated_part() {
    // y = x - a |x|^2 x on complex Gaussian x of unit power, u = |x|^2: g = 1 - 2 a (Bussgang 1952),
    // and the rest is a^2 <(u - 2)^2 u> = 2 a^2. With a = 0.02: sqrt(2) 0.02 / 0.96 = 2.946 %.
    // The powers are the mid-quantiles of the exponential law in a shuffled order, so that their moments
    // do not scatter; the 256 left out of 100 000 take away sqrt(172) / 2 * sqrt(256) / 100 000 = 0.1 %
    // of the power of the rest (its variance is 172 a^4), and the strata's finite width as much.
    let length = 100_000_usize;
    let a = 0.02;
    let mut random = ChaCha8Rng::seed_from_u64(77);
    let x: Vec<_> = (0..length)
        .map(|index| {
            let place = (index * 61_803 + 12_345) % length;
            let square = -((place as f64 + 0.5) / length as f64).ln();
            Complex64::from_polar(square.sqrt(), TAU * random.random::<f64>())
        })
        .collect();
    let y: Vec<_> = x.iter().map(|x| x - a * x.norm_sqr() * x).collect();
    let (alignment, figures) = compared(&x, &y, 0.0, None);
    let expected = 100.0 * 2_f64.sqrt() * a / (1.0 - 2.0 * a);
    let error = figures.evm_percent / expected - 1.0;
    assert!(error.abs() < 0.003, "{error}");
    assert!((alignment.gain - (1.0 - 2.0 * a)).norm() < 5e-4);
}

#[test]
fn a_pure_carrier_has_gain_but_no_delay() {
    let x = vec![Complex64::ONE; 10_000];
    let y = vec![Complex64::new(0.0, 2.0); 10_000];
    let (alignment, figures) = compared(&x, &y, 1e-4, None);
    assert_eq!(alignment.delay_s, 0.0);
    assert!((alignment.gain - Complex64::new(0.0, 2.0)).norm() < 1e-9);
    assert!(figures.nmse_db < -120.0);
}

proptest! {
    #![proptest_config(ProptestConfig {
        cases: 24,
        failure_persistence: None,
        ..ProptestConfig::default()
    })]

    /// EVM does not change with a complex gain and a delay; the distortion here is a cubic and an image.
    #[test]
    fn gain_and_delay_do_not_matter(
        size_db in -60.0..60.0_f64, angle in 0.0..TAU, delay in -40.0..40.0_f64, seed in 0_u64..1000,
    ) {
        let length = 12_000;
        let tones = Tones::random(30, 0.1, seed);
        let x = tones.samples(length, 0.0);
        let bent = |x: &Complex64| x * (1.0 - 0.05 * x.norm_sqr()) + 0.01 * x.conj();
        let here: Vec<_> = x.iter().map(bent).collect();
        let gain = Complex64::from_polar(10_f64.powf(size_db / 20.0), angle);
        let there: Vec<_> = tones.samples(length, delay).iter().map(|x| gain * bent(x)).collect();
        let (_, plain) = compared(&x, &here, 50e-6, Some(0.3e6));
        let (alignment, moved) = compared(&x, &there, 50e-6, Some(0.3e6));
        // The samples at the ends differ by up to 40 of 12 000, in which the error may be several
        // times its mean: 2 %. The delay is told apart from the distortion to as little.
        prop_assert!((moved.evm_percent / plain.evm_percent - 1.0).abs() < 0.02);
        prop_assert!((alignment.delay_s * RATE_HZ - delay).abs() < 0.01);
        prop_assert!((moved.evm_percent - plain.evm_percent).abs() < 0.1);
    }

    /// A complex gain alone changes nothing at all.
    #[test]
    fn gain_alone_changes_nothing(size_db in -100.0..100.0_f64, angle in 0.0..TAU) {
        let tones = Tones::random(20, 0.2, 1);
        let x = tones.samples(6_000, 0.0);
        let bent: Vec<_> = x.iter().map(|x| x * (1.0 - 0.05 * x.norm_sqr())).collect();
        let gain = Complex64::from_polar(10_f64.powf(size_db / 20.0), angle);
        let moved: Vec<_> = bent.iter().map(|y| y * gain).collect();
        let (_, plain) = compared(&x, &bent, 20e-6, None);
        let (_, moved) = compared(&x, &moved, 20e-6, None);
        prop_assert!((moved.evm_percent / plain.evm_percent - 1.0).abs() < 1e-9);
        prop_assert!((moved.evm_peak_percent / plain.evm_peak_percent - 1.0).abs() < 1e-9);
        prop_assert!((moved.nmse_db - plain.nmse_db).abs() < 1e-8);
    }
}
