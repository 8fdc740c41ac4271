//! Single carriers and OFDM against closed forms, slow direct sums and figures from SciPy and NumPy.

use std::f64::consts::{FRAC_2_PI, FRAC_PI_4, PI, TAU};

use num_complex::Complex64;
use quietedge::signal::{
    Centre, Ends, Kind, Levels, Modulation, Ofdm, Recipe, SingleCarrier, make, root_raised_cosine,
};
use rustfft::FftPlanner;

/// DFT scaled so that a constant 1 has bin 0 equal to 1.
fn lines(samples: &[Complex64]) -> Vec<Complex64> {
    let mut bins = samples.to_vec();
    FftPlanner::new()
        .plan_fft_forward(bins.len())
        .process(&mut bins);
    bins.iter().map(|bin| bin / samples.len() as f64).collect()
}

/// The one complex gain that brings `points` nearest to `seen`, and the RMS error relative to it.
fn fit(seen: &[Complex64], points: &[Complex64]) -> (Complex64, f64) {
    assert_eq!(seen.len(), points.len());
    let energy: f64 = points.iter().map(Complex64::norm_sqr).sum();
    let gain = seen
        .iter()
        .zip(points)
        .map(|(y, x)| y * x.conj())
        .sum::<Complex64>()
        / energy;
    let error: f64 = seen
        .iter()
        .zip(points)
        .map(|(y, x)| (y - gain * x).norm_sqr())
        .sum();
    (gain, (error / energy).sqrt() / gain.norm())
}

fn carrier(modulation: Modulation, ends: Ends) -> SingleCarrier {
    SingleCarrier {
        modulation,
        symbol_rate_hz: 4800.0,
        rolloff: 0.35,
        oversampling: 8,
        span: 64,
        symbols: 256,
        ends,
    }
}

#[test]
fn root_raised_cosine_is_the_transform_of_its_spectrum() {
    // scipy.integrate.quad (SciPy 1.17.1, epsabs 1e-14) of sqrt(raised cosine spectrum) cos(2 pi f t),
    // as printed. Tolerance: half a digit of the print, and the limit used within 1.5e-8 of a
    // singular point, which errs by less than 1e-8 and is held to 2e-8.
    for (t, rolloff, printed, tolerance) in [
        (0.0, 0.0, 1.0, 1e-12),
        (0.5, 0.0, FRAC_2_PI, 1e-12),
        (3.25, 0.0, -0.069_255_101_243, 1e-12),
        (0.0, 0.22, 1.060_112_699_842, 1e-12),
        (0.4, 0.22, 0.766_496_724_297, 1e-12),
        (0.25 / 0.22, 0.22, -0.157_184_262_077, 1e-12),
        (7.125, 0.22, 0.005_303_945_724, 1e-12),
        (0.25 / 0.35, 0.35, 0.260_603_460_938, 1e-12),
        (0.25 / 0.35 + 1e-9, 0.35, 0.260_603_459_403, 2e-8),
        (0.25 / 0.35 + 1e-6, 0.35, 0.260_601_926_834, 2e-8),
        (10.5, 0.35, -0.001_840_183_058, 1e-12),
        (0.5, 0.5, 0.578_632_469_633, 1e-12),
        (0.500_000_1, 0.5, 0.578_632_291_037, 2e-8),
        (1e-9, 0.5, 1.136_619_772_368, 1e-12),
        (1e-6, 0.5, 1.136_619_772_365, 2e-12),
        (0.25, 1.0, 1.0, 1e-12),
        (0.75, 1.0, 0.0, 1e-12),
        (5.0, 1.0, -0.003_191_076_553, 1e-12),
    ] {
        let h = root_raised_cosine(t, rolloff);
        assert!((h - printed).abs() < tolerance, "{t} {rolloff}: {h}");
        assert_eq!(h, root_raised_cosine(-t, rolloff));
    }
}

#[test]
fn the_filter_twice_has_no_intersymbol_interference() {
    // Twice the root is the raised cosine, zero at all other symbols (Nyquist). What is left comes
    // from cutting the filter off: NumPy 2.4.6 prints -88.4 dB RMS at roll-off 0.5, span 64, and
    // -74.3 dB at 0.35. A wrong formula leaves -30 dB or more.
    for (rolloff, printed_db) in [(0.5, -88.4), (0.35, -74.3)] {
        let oversampling = 8;
        let half = 32 * oversampling;
        let tap = |n: i64| {
            if n.abs() <= half {
                root_raised_cosine(n as f64 / oversampling as f64, rolloff)
            } else {
                0.0
            }
        };
        let twice = |symbol: i64| -> f64 {
            (-half..=half)
                .map(|n| tap(n) * tap(symbol * oversampling - n))
                .sum()
        };
        let centre = twice(0);
        let others: f64 = (1..=64).map(|k| 2.0 * twice(k).powi(2)).sum();
        let db = 10.0 * (others / centre.powi(2)).log10();
        assert!((db - printed_db).abs() < 0.06, "{rolloff}: {db}");
    }
}

#[test]
fn a_matched_filter_finds_the_symbols_again() {
    for modulation in [
        Modulation::Qpsk,
        Modulation::Pi4Dqpsk,
        Modulation::Psk8,
        Modulation::Qam16,
        Modulation::Qam64,
    ] {
        for ends in [Ends::Periodic, Ends::Open] {
            let carrier = carrier(modulation, ends);
            let made = make(&Recipe::new(Kind::SingleCarrier(carrier)), 5).unwrap();
            let x = made.as_slice();
            let length = x.len() as i64;
            let half = 32 * 8;
            let seen: Vec<Complex64> = (0..carrier.symbols)
                .map(|k| {
                    let centre = (carrier.first_symbol() + k * 8) as i64;
                    (-half..=half)
                        .map(|n| {
                            let at = (centre + n).rem_euclid(length) as usize;
                            x[at] * root_raised_cosine(n as f64 / 8.0, 0.35)
                        })
                        .sum()
                })
                .collect();
            let (gain, error) = fit(&seen, &carrier.points(5));
            // -74.3 dB of interference for unit-power symbols (test above) is 1.9e-4.
            assert!(error < 3e-4, "{modulation:?} {ends:?}: {error}");
            assert!(gain.im.abs() < 1e-3 * gain.re && gain.re > 0.0, "{gain}");
        }
    }
}

#[test]
fn the_spectrum_ends_where_the_rolloff_says() {
    let carrier = carrier(Modulation::Qam16, Ends::Periodic);
    let made = make(&Recipe::new(Kind::SingleCarrier(carrier)), 1).unwrap();
    let bins = lines(made.as_slice());
    let bin_hz = carrier.rate_hz() / bins.len() as f64;
    let (mut inside, mut outside) = (0.0, 0.0);
    for (k, bin) in bins.iter().enumerate() {
        let hz = (k.min(bins.len() - k)) as f64 * bin_hz;
        if hz <= 4800.0 * 1.35 / 2.0 {
            inside += bin.norm_sqr();
        } else {
            outside += bin.norm_sqr();
        }
    }
    // NumPy 2.4.6 prints -61.6 dB for the highest density outside, just beside the edge, falling from
    // there: all the power outside together must stay below that one density over the whole band.
    assert!(10.0 * (outside / inside).log10() < -60.0);
}

#[test]
fn differential_phases_turn_by_odd_eighths_and_close() {
    let carrier = carrier(Modulation::Pi4Dqpsk, Ends::Periodic);
    let points = carrier.points(9);
    let mut seen = [0; 4];
    for (k, point) in points.iter().enumerate() {
        let turn = points[(k + 1) % points.len()] * point.conj();
        let odd = turn.arg() / FRAC_PI_4;
        let nearest = odd.round();
        assert!((odd - nearest).abs() < 1e-9 && nearest.rem_euclid(2.0) == 1.0);
        seen[((nearest as i64).rem_euclid(8) / 2) as usize] += 1;
    }
    // 256 draws of four equal chances: 64 each, standard deviation 7.
    assert!(
        seen.iter().all(|count| (36..92).contains(count)),
        "{seen:?}"
    );
    let odd = SingleCarrier {
        symbols: 255,
        ..carrier
    };
    assert!(make(&Recipe::new(Kind::SingleCarrier(odd)), 1).is_err());
}

fn ofdm(edge: usize, ends: Ends, centre: Centre) -> Ofdm {
    Ofdm {
        modulation: Modulation::Qam16,
        spacing_hz: 15e3,
        fft_size: 64,
        carriers: 53,
        centre,
        prefix: 16,
        edge,
        oversampling: 4,
        symbols: 9,
        ends,
    }
}

#[test]
fn ofdm_carriers_are_orthogonal() {
    for (edge, ends, centre) in [
        (0, Ends::Open, Centre::Used),
        (8, Ends::Open, Centre::Empty),
        (16, Ends::Periodic, Centre::Used),
    ] {
        let ofdm = ofdm(edge, ends, centre);
        let made = make(&Recipe::new(Kind::Ofdm(ofdm)), 3).unwrap();
        let x = made.as_slice();
        let tail = if ends == Ends::Open { edge * 4 } else { 0 };
        assert_eq!(x.len(), 9 * 80 * 4 + tail);
        let (mut seen, mut sent) = (Vec::new(), Vec::new());
        for (symbol, points) in ofdm.points(3).iter().enumerate() {
            let start = ofdm.first_useful() + symbol * ofdm.symbol_samples();
            let bins = lines(&x[start..start + 256]);
            let mut used = vec![false; 256];
            for (offset, point) in ofdm.offsets().iter().zip(points) {
                let bin = offset.rem_euclid(256) as usize;
                used[bin] = true;
                seen.push(bins[bin]);
                sent.push(*point);
            }
            for (bin, value) in bins.iter().enumerate() {
                assert!(used[bin] || value.norm() < 1e-14, "{bin}: {value}");
            }
            assert_eq!(used[0], centre == Centre::Used);
        }
        // One gain for all symbols: rounding only.
        let (_, error) = fit(&seen, &sent);
        assert!(error < 1e-13, "{error}");
    }
}

#[test]
fn ofdm_is_the_direct_sum_and_its_edge_fades() {
    let ofdm = ofdm(8, Ends::Open, Centre::Empty);
    let made = make(&Recipe::new(Kind::Ofdm(ofdm)), 3).unwrap();
    let points = ofdm.points(3);
    // x(n) = sum_k c_k exp(j 2 pi k n / N), n from the useful part; symbol 2 with 8 edge samples.
    let direct: Vec<Complex64> = (0..9 * 320 + 32)
        .map(|at: i64| {
            (0..9)
                .map(|symbol| {
                    let n = at - symbol * 320 - 64;
                    let fade = match n + 64 {
                        d @ 0..32 => (0.5 * PI * (d as f64 + 0.5) / 32.0).sin().powi(2),
                        32..320 => 1.0,
                        d @ 320..352 => (0.5 * PI * ((d - 320) as f64 + 0.5) / 32.0).cos().powi(2),
                        _ => return Complex64::ZERO,
                    };
                    ofdm.offsets()
                        .iter()
                        .zip(&points[symbol as usize])
                        .map(|(k, c)| c * Complex64::from_polar(fade, TAU * (k * n) as f64 / 256.0))
                        .sum::<Complex64>()
                })
                .sum()
        })
        .collect();
    let (gain, error) = fit(made.as_slice(), &direct);
    assert!(error < 1e-12, "{error}");
    assert!((Levels::of(made.as_slice()).peak - 1.0).abs() < 1e-12);
    assert!(gain.im.abs() < 1e-14);
}

#[test]
fn ofdm_offsets_are_what_they_say() {
    let with = |carriers, centre| {
        Ofdm {
            carriers,
            centre,
            ..ofdm(0, Ends::Open, centre)
        }
        .offsets()
    };
    assert_eq!(with(4, Centre::Empty), [-2, -1, 1, 2]);
    assert_eq!(with(3, Centre::Empty), [-2, -1, 1]);
    assert_eq!(with(4, Centre::Used), [-2, -1, 0, 1]);
    assert_eq!(with(3, Centre::Used), [-1, 0, 1]);
}
