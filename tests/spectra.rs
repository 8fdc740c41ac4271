//! Spectra and powers against SciPy and NumPy on the same stream, and against a closed form.

use num_complex::Complex64;
use quietedge::math::Window;
use quietedge::math::window::enbw_of;
use quietedge::metrics::{
    Alignment, ChannelFilter, EnvelopeMeter, ErrorMeter, Hold, Spectrum, SpectrumMeter,
    SpectrumPlan, adjacent_channels, occupied_bandwidth,
};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use serde_json::Value;
use std::f64::consts::{PI, TAU};

/// Numbers of SciPy 1.17.1 and NumPy 2.4.6; `tests/reference/spectra.py` writes and checks them.
fn stored() -> Value {
    serde_json::from_str(include_str!("reference/spectra.json")).unwrap_or_else(|e| panic!("{e}"))
}

fn number(value: &Value) -> f64 {
    value
        .as_f64()
        .unwrap_or_else(|| panic!("no number: {value}"))
}

fn numbers(value: &Value) -> Vec<f64> {
    let list = value.as_array().unwrap_or_else(|| panic!("no list"));
    list.iter().map(number).collect()
}

fn window(name: &str) -> Window {
    match name {
        "hann" => Window::Hann,
        "blackman_harris" => Window::BlackmanHarris,
        "flat_top" => Window::FlatTop,
        "kaiser_8.6" => Window::Kaiser(8.6),
        other => panic!("{other}"),
    }
}

/// The stream of the script, sample by sample the same.
fn stream(count: u64) -> Vec<Complex64> {
    let mut state = 1_u64;
    let mut draw = move || {
        state = state
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        (state >> 11) as f64 * 2_f64.powi(-53) - 0.5
    };
    let (mut slow_i, mut slow_q) = (0.0, 0.0);
    (0..count)
        .map(|n| {
            slow_i = 0.9 * slow_i + draw();
            slow_q = 0.9 * slow_q + draw();
            let phase = TAU * ((n * 777) % 6000) as f64 / 6000.0;
            let re = slow_i + 0.01 * draw() + 0.3 * phase.cos();
            Complex64::new(re, slow_q + 0.01 * draw() + 0.3 * phase.sin())
        })
        .collect()
}

fn measured(plan: SpectrumPlan, rate_hz: f64, load_ohm: f64, samples: &[Complex64]) -> Spectrum {
    let meter = SpectrumMeter::new(plan, rate_hz, load_ohm);
    let mut meter = meter.unwrap_or_else(|error| panic!("{error}"));
    samples.chunks(777).for_each(|piece| meter.push(piece));
    meter.finish().unwrap_or_else(|error| panic!("{error}"))
}

#[test]
fn windows_are_scipys() {
    for (name, samples) in stored()["windows"].as_object().unwrap_or_else(|| panic!()) {
        // The script leaves the flat top at a peak of 4.77 too: both are a0 = 1.
        for (own, other) in window(name).samples(20).iter().zip(numbers(samples)) {
            assert!((own - other).abs() < 1e-14, "{name}: {own} {other}");
        }
    }
}

#[test]
fn spectra_are_scipys() {
    let stored = stored();
    let (rate_hz, load_ohm) = (number(&stored["rate_hz"]), number(&stored["load_ohm"]));
    let x = stream(stored["samples"].as_u64().unwrap_or(0));
    let last = numbers(&stored["last"]);
    assert!((x[x.len() - 1] - Complex64::new(last[0], last[1])).norm() < 1e-12);
    for case in stored["spectra"].as_array().unwrap_or(&Vec::new()) {
        let plan = SpectrumPlan {
            length: case["length"].as_u64().unwrap_or(0) as usize,
            window: window(case["window"].as_str().unwrap_or("")),
            overlap: number(&case["overlap"]),
            hold: Hold::Peak,
        };
        let spectrum = measured(plan, rate_hz, load_ohm, &x);
        assert!((spectrum.enbw_hz / number(&case["enbw_hz"]) - 1.0).abs() < 1e-12);
        let samples = plan.window.samples(plan.length);
        assert!((enbw_of(&samples) * spectrum.bin_hz / spectrum.enbw_hz - 1.0).abs() < 1e-12);
        let peak = spectrum.peak_w_per_hz.clone().unwrap_or_default();
        for (own, other) in [
            (&spectrum.mean_w_per_hz, numbers(&case["mean_w_per_hz"])),
            (&peak, numbers(&case["peak_w_per_hz"])),
        ] {
            assert_eq!(own.len(), other.len());
            for (own, other) in own.iter().zip(other) {
                // Asked for: 0.01 dB. Both compute the same sum in double precision: 1e-9 is rounding.
                assert!((own / other - 1.0).abs() < 1e-9, "{plan:?}: {own} {other}");
            }
        }
        let edges = numbers(&case["occupied_hz"]);
        let band = occupied_bandwidth(&spectrum, 0.99).unwrap_or_else(|e| panic!("{e}"));
        assert!((band.from_hz - edges[0]).abs() < 1e-6 && (band.to_hz - edges[1]).abs() < 1e-6);
    }
}

#[test]
fn envelope_and_error_are_numpys() {
    let stored = stored();
    let x = stream(stored["samples"].as_u64().unwrap_or(0));
    let mut meter = EnvelopeMeter::new(number(&stored["load_ohm"]));
    meter.push(&x);
    let figures = meter.finish().unwrap_or_else(|| panic!("no power"));
    let envelope = &stored["envelope"];
    assert!((figures.mean_w / number(&envelope["mean_w"]) - 1.0).abs() < 1e-12);
    assert!((figures.papr_db - number(&envelope["papr_db"])).abs() < 1e-9);
    for pair in envelope["quantiles_db"].as_array().unwrap_or(&Vec::new()) {
        let (probability, level_db) = (number(&pair[0]), number(&pair[1]));
        let own = figures.quantile_db(probability).unwrap_or(f64::NAN);
        // One cell of the count, and the distance of neighbouring samples, which NumPy interpolates:
        // among the highest 20 of 20 000 some 0.05 dB.
        let tolerance = if probability < 0.01 { 0.05 } else { 0.01 };
        assert!(
            (own - level_db).abs() < tolerance,
            "{probability}: {own} {level_db}"
        );
    }

    let y: Vec<_> = x
        .iter()
        .map(|x| Complex64::new(0.3, -0.4) * x * (1.0 - 0.02 * x.norm_sqr()))
        .collect();
    let alignment = Alignment {
        delay_s: 0.0,
        gain: Complex64::new(0.2, -0.2),
        correlation: 1.0,
        samples: 0,
    };
    let figures = ErrorMeter::new(alignment, 48e3, None).and_then(|mut meter| {
        meter.push(&x, &y)?;
        meter.finish()
    });
    let figures = figures.unwrap_or_else(|error| panic!("{error}"));
    let gain = numbers(&stored["cubic"]["gain"]);
    assert!((figures.gain - Complex64::new(gain[0], gain[1])).norm() < 1e-9);
    assert!((figures.evm_percent / number(&stored["cubic"]["evm_percent"]) - 1.0).abs() < 1e-9);
    assert_eq!(figures.left_out, 256);
}

/// Regrowth of Gaussian noise through a cubic, `y = x - a |x|^2 x`.
///
/// For a circular Gaussian x with correlation R(k) and power p = R(0), the output splits into a part that
/// follows x and one uncorrelated with it (J. J. Bussgang, "Crosscorrelation functions of
/// amplitude-distorted Gaussian signals", MIT RLE report 216, 1952): y = (1 - 2 a p) x + d, because
/// <|x|^2 x x*> = 2 p^2. By pairing the six factors of <|x1|^2 x1 (|x2|^2 x2)*> (Isserlis), four of the
/// 3! = 6 pairings give p^2 R and two give |R|^2 R, so that <d1 d2*> = 2 a^2 |R|^2 R, whose transform is
/// 2 a^2 times S(f) * S(f) * S(-f). A Welch estimate sees the correlation under the window's own
/// correlation; here it is computed with it, so that no smoothness of S is assumed.
#[test]
fn a_cubic_regrows_in_closed_form() {
    let mut random = ChaCha8Rng::seed_from_u64(42);
    let half = 40_i32;
    // A low pass to 1/16 of the rate to each side.
    let taps: Vec<f64> = (-half..=half)
        .map(|n| {
            let at = f64::from(n);
            let taper = (PI * at / f64::from(2 * half + 2)).cos().powi(2);
            let sinc = if n == 0 {
                0.125
            } else {
                (0.125 * PI * at).sin() / (PI * at)
            };
            taper * sinc
        })
        .collect();
    let norm = taps.iter().map(|tap| tap * tap).sum::<f64>().sqrt();
    let taps: Vec<f64> = taps.iter().map(|tap| tap / norm).collect();
    let white: Vec<Complex64> = (0..400_000)
        .map(|_| {
            let (re, im): (f64, f64) = (
                StandardNormal.sample(&mut random),
                StandardNormal.sample(&mut random),
            );
            Complex64::new(re, im) * 0.5_f64.sqrt()
        })
        .collect();
    let a = 0.03;
    let y: Vec<Complex64> = white
        .windows(taps.len())
        .map(|near| {
            let x: Complex64 = near.iter().zip(&taps).map(|(w, tap)| w * tap).sum();
            x * (1.0 - a * x.norm_sqr())
        })
        .collect();
    let plan = SpectrumPlan {
        length: 256,
        window: Window::BlackmanHarris,
        overlap: 0.5,
        hold: Hold::None,
    };
    let (rate_hz, load_ohm) = (256.0, 0.5);
    let spectrum = measured(plan, rate_hz, load_ohm, &y);

    let weights = plan.window.samples(plan.length);
    let squares: f64 = weights.iter().map(|w| w * w).sum();
    // `third` is 0 for the part that follows the input alone.
    let expected = |third: f64| {
        let lags: Vec<f64> = (0..taps.len())
            .map(|lag| {
                let r: f64 = taps.iter().zip(&taps[lag..]).map(|(p, q)| p * q).sum();
                let w: f64 = weights
                    .iter()
                    .zip(&weights[lag..])
                    .map(|(p, q)| p * q)
                    .sum();
                ((1.0 - 2.0 * a).powi(2) * r + third * r.powi(3)) * w / squares
            })
            .collect();
        let density = |bin| {
            let phase = TAU * spectrum.offset_hz(bin) / rate_hz;
            let both = |(lag, r): (usize, &f64)| 2.0 * r * (phase * lag as f64).cos();
            (lags.iter().enumerate().skip(1).map(both).sum::<f64>() + lags[0]) / rate_hz
        };
        Spectrum {
            mean_w_per_hz: (0..256).map(density).collect(),
            ..spectrum.clone()
        }
    };
    let (linear, expected) = (expected(0.0), expected(2.0 * a * a));
    let channel = ChannelFilter::Flat { bandwidth_hz: 40.0 };
    let beside = ChannelFilter::Flat { bandwidth_hz: 12.0 };
    let acpr = |spectrum| {
        adjacent_channels(spectrum, &channel, &[(32.0, beside), (40.0, beside)])
            .unwrap_or_else(|e| panic!("{e}"))
    };
    for ((own, closed), linear) in acpr(&spectrum)
        .iter()
        .zip(acpr(&expected))
        .zip(acpr(&linear))
    {
        println!(
            "{} Hz: {:.3} and {:.3} dB, closed form {:.3} dB, without regrowth {:.1} dB",
            own.offset_hz, own.lower_db, own.upper_db, closed.lower_db, linear.lower_db
        );
        assert!(linear.lower_db < closed.lower_db - 10.0);
        assert!((own.lower_db - closed.lower_db).abs() < 0.2);
        assert!((own.upper_db - closed.upper_db).abs() < 0.2);
    }
    assert!((10.0 * (spectrum.total_w() / expected.total_w()).log10()).abs() < 0.05);
}

#[test]
fn acpr_of_a_drawn_spectrum() {
    // 1 W/Hz in the channel, a thousandth below and a tenth of that above, from 7.5 Hz on.
    let spectrum = Spectrum {
        bin_hz: 1.0,
        enbw_hz: 1.5,
        mean_w_per_hz: (-30..=30)
            .map(|hz| match hz {
                ..=-8 => 1e-3,
                -7..=7 => 1.0,
                8.. => 1e-4,
            })
            .collect(),
        peak_w_per_hz: None,
        segments: 1,
    };
    let main = ChannelFilter::Flat { bandwidth_hz: 15.0 };
    let beside = ChannelFilter::Flat { bandwidth_hz: 7.5 };
    let acpr = adjacent_channels(&spectrum, &main, &[(15.0, beside)]);
    let acpr = acpr.unwrap_or_else(|error| panic!("{error}"));
    assert!((acpr[0].lower_db - (-30.0 - 10.0 * 2_f64.log10())).abs() < 1e-9);
    assert!((acpr[0].upper_db - (-40.0 - 10.0 * 2_f64.log10())).abs() < 1e-9);
    assert!(adjacent_channels(&spectrum, &main, &[(28.0, beside)]).is_err());
}
