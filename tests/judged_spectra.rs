//! From samples to a verdict: spectra as the limits want them, of signals whose margins are known.

use num_complex::Complex64;
use quietedge::limits::{Library, Limits};
use quietedge::math::Window;
use quietedge::metrics::{Hold, Spectrum, SpectrumMeter, SpectrumPlan};
use quietedge::verdict::{Judgement, Measured, Outcome, Side, Wanted, judge};

const LOAD_OHM: f64 = 50.0;

fn take(samples: &[Complex64], rate_hz: f64, resolution_hz: f64, hold: Hold) -> Spectrum {
    let window = match hold {
        Hold::Peak => Window::FlatTop,
        Hold::None => Window::BlackmanHarris,
    };
    let plan = SpectrumPlan::for_resolution(rate_hz, resolution_hz, window, hold).unwrap();
    let mut meter = SpectrumMeter::new(plan, rate_hz, LOAD_OHM).unwrap();
    meter.push(samples);
    meter.finish().unwrap()
}

fn verdict(samples: &[Complex64], rate_hz: f64, name: &str) -> Judgement {
    let limits = Limits::of_set(Library::published().unwrap().find(name).unwrap().clone());
    let wanted = Wanted::of(&limits);
    assert!(rate_hz >= wanted.span_hz, "{wanted:?}");
    let fine = take(
        samples,
        rate_hz,
        wanted.fine_resolution_hz.unwrap(),
        Hold::None,
    );
    let peak_hold: Vec<Spectrum> = wanted
        .peak_hold_resolutions_hz
        .iter()
        .map(|hz| take(samples, rate_hz, *hz, Hold::Peak))
        .collect();
    let powers_w = || samples.iter().map(|x| x.norm_sqr() / (2.0 * LOAD_OHM));
    let measured = Measured {
        fine: &fine,
        peak_hold: &peak_hold,
        mean_w: powers_w().sum::<f64>() / samples.len() as f64,
        peak_w: powers_w().fold(0.0, f64::max),
        evm_percent: None,
        evm_peak_percent: None,
        evm_p95_percent: None,
        evm_p99_percent: None,
        modulation: None,
        harmonics_dbc: None,
        stress: None,
    };
    judge(&measured, &limits)
}

/// A carrier of 5 W and a spur 50 dB below it, `spur_hz` above.
fn carrier_and_spur(rate_hz: f64, spur_hz: f64) -> Vec<Complex64> {
    let carrier_v = (2.0 * LOAD_OHM * 5.0_f64).sqrt();
    (0..300_000)
        .map(|at| {
            let turns = (spur_hz * at as f64 / rate_hz).fract();
            let spur = Complex64::from_polar(10f64.powf(-2.5), std::f64::consts::TAU * turns);
            carrier_v * (1.0 + spur)
        })
        .collect()
}

#[test]
fn a_spur_under_mask_d() {
    let judgement = verdict(
        &carrier_and_spur(600e3, 20_011.0),
        600e3,
        "fcc_90_210_mask_d",
    );
    // Peak envelope power 5 W (1 + 10^-2.5)^2 = 37.0171 dBm; mean power 5 W (1 + 1e-5).
    // Limit 37.0171 - (50 + 10 log10 5.00005) = -19.9727 dBm; the spur holds -13.0103 dBm.
    let upper = judgement
        .mask
        .iter()
        .find(|margin| margin.from_hz == 12.5e3 && margin.side == Side::Upper)
        .unwrap();
    // The flat-top window reads a tone between two bins 0.004 dB low at worst.
    assert!((upper.margin_db + 6.9624).abs() < 0.005, "{upper:?}");
    assert!((upper.worst_hz - 20_011.0).abs() < 30.0, "{upper:?}");
    assert_eq!(judgement.verdict.outcome, Outcome::Outside);
    for check in judgement
        .verdict
        .checks
        .iter()
        .filter(|check| !check.name.contains("12.5 kHz to"))
    {
        assert_eq!(check.outcome, Outcome::Within, "{}", check.reason);
    }
}

#[test]
fn a_bare_carrier_is_within_mask_d() {
    let samples = vec![Complex64::new((2.0 * LOAD_OHM * 5.0_f64).sqrt(), 0.0); 300_000];
    let judgement = verdict(&samples, 600e3, "fcc_90_210_mask_d");
    assert_eq!(
        judgement.verdict.outcome,
        Outcome::Within,
        "{:?}",
        judgement.verdict
    );
    assert_eq!(judgement.verdict.checks.len(), 4);
}
