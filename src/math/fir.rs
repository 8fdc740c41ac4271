//! Finite filters made from a sinc under Kaiser's window.

use super::window::{bessel_i0, sinc};

/// Kaiser's `beta` for ripples `attenuation_db` down in both bands, 50 dB or more:
/// `0.1102 (A - 8.7)` (J. F. Kaiser, "Nonrecursive digital filter design using the I0-sinh window
/// function", IEEE Int. Symp. Circuits Syst., 1974).
pub fn kaiser_beta(attenuation_db: f64) -> f64 {
    0.1102 * (attenuation_db.max(50.0) - 8.7)
}

/// Taps on one side of the centre for a transition `transition` wide (cycles a sample) at
/// `attenuation_db`: half of Kaiser's `(A - 7.95) / (2.285 * 2 pi * transition)`, rounded up.
pub fn kaiser_half_taps(attenuation_db: f64, transition: f64) -> usize {
    let order = (attenuation_db - 7.95) / (2.285 * std::f64::consts::TAU * transition);
    (order / 2.0).ceil().max(1.0) as usize
}

/// Low pass of unit gain with its half-amplitude point at `cutoff` (cycles a sample, up to 1/2):
/// `2 half + 1` taps, the centre at index `half`, symmetric.
pub fn low_pass(cutoff: f64, half: usize, attenuation_db: f64) -> Vec<f64> {
    let mut taps = sinc_taps(0.0, 2.0 * cutoff, half, attenuation_db);
    let sum: f64 = taps.iter().sum();
    taps.iter_mut().for_each(|tap| *tap /= sum);
    taps
}

/// Advances a sequence by `advance` of a sample, -1/2 to 1/2: `2 half + 1` taps `h` with
/// `y(t + advance) = sum h[half + m] y[t - m]`.
///
/// Right to `attenuation_db` up to half a transition of [`kaiser_half_taps`] below half the rate.
pub fn fractional_advance(advance: f64, half: usize, attenuation_db: f64) -> Vec<f64> {
    sinc_taps(advance, 1.0, half, attenuation_db)
}

fn sinc_taps(advance: f64, width: f64, half: usize, attenuation_db: f64) -> Vec<f64> {
    let beta = kaiser_beta(attenuation_db);
    (0..2 * half + 1)
        .map(|index| {
            let at = index as f64 - half as f64 + advance;
            let part = at / (half as f64 + 1.0);
            let taper = bessel_i0(beta * (1.0 - part * part).max(0.0).sqrt()) / bessel_i0(beta);
            width * sinc(width * at) * taper
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use num_complex::Complex64;
    use std::f64::consts::TAU;

    fn response(taps: &[f64], cycles: f64) -> Complex64 {
        let half = (taps.len() / 2) as f64;
        taps.iter()
            .enumerate()
            .map(|(i, tap)| tap * Complex64::cis(-TAU * cycles * (i as f64 - half)))
            .sum()
    }

    #[test]
    fn fractional_advance_is_right_to_its_attenuation() {
        let half = 128;
        for advance in [-0.5, -0.123, 0.0, 0.25, 0.499] {
            let taps = fractional_advance(advance, half, 130.0);
            for step in -48..=48 {
                let cycles = step as f64 / 100.0;
                let error = response(&taps, cycles) - Complex64::cis(TAU * cycles * advance);
                // -125 dB: Kaiser's rule of thumb for beta holds to a few decibels.
                assert!(error.norm() < 5.6e-7, "{advance} {cycles} {}", error.norm());
            }
        }
    }

    #[test]
    fn low_pass_passes_and_stops() {
        let transition = 0.02;
        let half = kaiser_half_taps(80.0, transition);
        let taps = low_pass(0.1, half, 80.0);
        for step in 0..=500 {
            let cycles = step as f64 / 1000.0;
            let gain = response(&taps, cycles);
            assert!(gain.im.abs() < 1e-12);
            if cycles <= 0.1 - transition / 2.0 {
                assert!((gain.re - 1.0).abs() < 1.5e-4, "{cycles} {gain}");
            } else if cycles >= 0.1 + transition / 2.0 {
                assert!(gain.re.abs() < 1.5e-4, "{cycles} {gain}");
            }
        }
        assert!((response(&taps, 0.1).re - 0.5).abs() < 1e-3);
    }
}
