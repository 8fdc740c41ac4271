//! Tones, noise and ramps against closed forms and figures from NumPy; what holds for all signals.

use num_complex::Complex64;
use proptest::prelude::*;
use quietedge::signal::{
    Centre, Ends, Kind, Levels, Modulation, Noise, Ofdm, Phases, Ramp, Recipe, SingleCarrier,
    Tones, make,
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
fn tones_are_lines_of_equal_power() {
    for (count, phases) in [(2, Phases::Equal), (8, Phases::Newman), (7, Phases::Random)] {
        let tones = Tones {
            rate_hz: 64e3,
            samples: 6400,
            count,
            spacing_hz: 1e3,
            phases,
            ends: Ends::Periodic,
        };
        let made = make(&Recipe::new(Kind::Tones(tones)), 2).unwrap();
        let bins = lines(made.as_slice());
        let mut powers: Vec<f64> = bins.iter().map(Complex64::norm_sqr).collect();
        let wanted: Vec<f64> = (0..count)
            .map(|k| {
                let bin = (tones.offset_hz(k) / 10.0).round() as i64;
                std::mem::take(&mut powers[bin.rem_euclid(6400) as usize])
            })
            .collect();
        for power in &wanted {
            assert!((power / wanted[0] - 1.0).abs() < 1e-10, "{wanted:?}");
        }
        assert!(powers.iter().all(|power| *power < 1e-22 * wanted[0]));
    }
}

#[test]
fn peaks_of_tones_are_the_known_ones() {
    let papr = |count, phases, spacing_hz| {
        let tones = Tones {
            rate_hz: 64e3,
            samples: 64_000,
            count,
            spacing_hz,
            phases,
            ends: Ends::Periodic,
        };
        Levels::of(
            make(&Recipe::new(Kind::Tones(tones)), 1)
                .unwrap()
                .as_slice(),
        )
        .papr_db
    };
    // Equal phases meet: n^2 / n. NumPy 2.4.6 prints 2.5372018729769863 for Newman's, n = 8.
    assert!((papr(2, Phases::Equal, 1e3) - 10.0 * 2f64.log10()).abs() < 1e-10);
    assert!((papr(9, Phases::Equal, 1e3) - 10.0 * 9f64.log10()).abs() < 1e-10);
    assert!((papr(8, Phases::Newman, 1e3) - 2.537_201_872_976_986_3).abs() < 1e-9);
}

#[test]
fn noise_is_gaussian_and_keeps_to_its_band() {
    let noise = Noise {
        rate_hz: 1e6,
        samples: 60_000,
        bandwidth_hz: 200e3,
        ends: Ends::Periodic,
    };
    let made = make(&Recipe::new(Kind::Noise(noise)), 4).unwrap();
    let bins = lines(made.as_slice());
    let outside = |k: usize| (k.min(60_000 - k)) as f64 * (1e6 / 60e3) > 100e3;
    let power = |keep: &dyn Fn(usize) -> bool| -> f64 {
        (0..60_000)
            .filter(|k| keep(*k))
            .map(|k| bins[k].norm_sqr())
            .sum()
    };
    let total = power(&|_| true);
    assert!(power(&outside) < 1e-26 * total);
    // Flat: 12,001 lines, so a half has a relative spread of 1/sqrt(6000), 1.3 %; 4 spreads allowed.
    let upper = power(&|k| k < 30_000 && k > 0) / total;
    let inner = power(&|k| k.min(60_000 - k) <= 3_000) / total;
    assert!(
        (upper - 0.5).abs() < 0.026 && (inner - 0.5).abs() < 0.026,
        "{upper} {inner}"
    );
    // Complex Gaussian: E|x|^4 = 2 (E|x|^2)^2; 12,001 free values, spread about 2 %.
    let moment = |power: i32| {
        made.as_slice()
            .iter()
            .map(|x| x.norm_sqr().powi(power))
            .sum::<f64>()
            / 60_000.0
    };
    assert!((moment(2) / moment(1).powi(2) - 2.0).abs() < 0.1);
    // The open form is a piece of such a period: same band, up to leakage.
    let open = Noise {
        ends: Ends::Open,
        ..noise
    };
    let piece = make(&Recipe::new(Kind::Noise(open)), 4).unwrap();
    assert_eq!(piece.as_slice().len(), 60_000);
}

#[test]
fn ramps_rise_by_equal_steps() {
    let ramp = |ends, samples, from| {
        let ramp = Ramp {
            rate_hz: 1e6,
            samples,
            from,
            ends,
        };
        let recipe = Recipe {
            kind: Kind::Ramp(ramp),
            peak: 0.5,
        };
        make(&recipe, 1)
            .unwrap()
            .as_slice()
            .iter()
            .map(|x| x.re)
            .collect::<Vec<f64>>()
    };
    assert_eq!(ramp(Ends::Open, 5, 0.0), [0.0, 0.125, 0.25, 0.375, 0.5]);
    assert_eq!(ramp(Ends::Periodic, 4, 0.5), [0.25, 0.375, 0.5, 0.375]);
}

#[test]
fn the_same_seed_gives_the_same_samples() {
    let recipe = Recipe::new(Kind::SingleCarrier(carrier(Modulation::Qam64, Ends::Open)));
    let first = make(&recipe, 1).unwrap();
    assert_eq!(first.as_slice(), make(&recipe, 1).unwrap().as_slice());
    assert_ne!(first.as_slice(), make(&recipe, 2).unwrap().as_slice());
}

#[test]
fn what_cannot_be_made_is_refused() {
    let good = carrier(Modulation::Qpsk, Ends::Open);
    let bad_carriers = [
        SingleCarrier {
            rolloff: 1.1,
            ..good
        },
        SingleCarrier {
            rolloff: f64::NAN,
            ..good
        },
        SingleCarrier {
            symbol_rate_hz: 0.0,
            ..good
        },
        SingleCarrier { span: 7, ..good },
        SingleCarrier {
            oversampling: 1,
            ..good
        },
        SingleCarrier {
            symbols: usize::MAX,
            ..good
        },
        SingleCarrier { symbols: 0, ..good },
    ];
    let good = ofdm(0, Ends::Open, Centre::Empty);
    let bad_ofdm = [
        Ofdm {
            carriers: 64,
            ..good
        },
        Ofdm { edge: 17, ..good },
        Ofdm { prefix: 65, ..good },
        Ofdm {
            modulation: Modulation::Pi4Dqpsk,
            ..good
        },
        Ofdm {
            oversampling: usize::MAX / 2,
            ..good
        },
        Ofdm {
            fft_size: usize::MAX,
            ..good
        },
    ];
    let good = Tones {
        rate_hz: 64e3,
        samples: 6400,
        count: 2,
        spacing_hz: 1e3,
        phases: Phases::Equal,
        ends: Ends::Periodic,
    };
    let bad_tones = [
        Tones {
            spacing_hz: 1001.0,
            ..good
        },
        Tones {
            spacing_hz: 65e3,
            ..good
        },
        Tones {
            count: usize::MAX,
            ..good
        },
        Tones { samples: 0, ..good },
    ];
    let kinds = (bad_carriers.map(Kind::SingleCarrier).into_iter())
        .chain(bad_ofdm.map(Kind::Ofdm))
        .chain(bad_tones.map(Kind::Tones));
    for kind in kinds {
        assert!(make(&Recipe::new(kind), 1).is_err(), "{kind:?}");
    }
    for peak in [0.0, -1.0, 1.5, f64::NAN] {
        let recipe = Recipe {
            kind: Kind::Tones(good),
            peak,
        };
        assert!(make(&recipe, 1).is_err(), "{peak}");
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(64))]

    /// Whatever is made has the stated length, rate and peak.
    #[test]
    fn peak_and_length_are_as_stated(
        seed: u64, symbols in 1usize..40, oversampling in 2usize..6, half_span in 1usize..40,
        rolloff in 0.0f64..=1.0, peak in 0.01f64..=1.0, periodic: bool,
    ) {
        let carrier = SingleCarrier {
            modulation: Modulation::Qam64,
            symbol_rate_hz: 1e4,
            rolloff,
            oversampling,
            span: 2 * half_span,
            symbols,
            ends: if periodic { Ends::Periodic } else { Ends::Open },
        };
        let recipe = Recipe { kind: Kind::SingleCarrier(carrier), peak };
        let made = make(&recipe, seed).unwrap();
        let levels = Levels::of(made.as_slice());
        prop_assert_eq!(levels.samples as usize, recipe.check().unwrap());
        prop_assert!((levels.peak - peak).abs() < 1e-12);
        prop_assert!(levels.papr_db > -1e-9);
    }
}
