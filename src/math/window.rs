//! Windows for spectral estimates: their samples and their noise bandwidths.

use std::f64::consts::{PI, TAU};

/// 4-term Blackman-Harris, -92 dB: F. J. Harris, "On the use of windows for harmonic analysis with
/// the discrete Fourier transform", Proc. IEEE, Jan. 1978.
const BLACKMAN_HARRIS: [f64; 4] = [0.35875, 0.48829, 0.14128, 0.01168];

/// Five-term flat top HFT90D: G. Heinzel, A. Rudiger, R. Schilling, "Spectrum and spectral density
/// estimation by the discrete Fourier transform (DFT)", Max Planck Institute, Feb. 2002 (from memory;
/// the tests hold the properties it is published with: 0.004 dB scalloping, -90.2 dB sidelobes).
const FLAT_TOP: [f64; 5] = [1.0, 1.942604, 1.340318, 0.440811, 0.043097];

/// A window over one block of samples, in its periodic (DFT-even) form:
/// `w[n] = a0 - a1 cos(2 pi n / length) + a2 cos(4 pi n / length) - ...`, or for Kaiser's
/// `w[n] = I0(beta sqrt(1 - (2 n / length - 1)^2)) / I0(beta)`.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Window {
    /// Raised cosine, `a = (1/2, 1/2)`.
    Hann,
    /// 4-term Blackman-Harris, sidelobes below -92 dB (Harris 1978).
    BlackmanHarris,
    /// Reads the power of a tone between two bins 0.004 dB low at worst; sidelobes below -90 dB
    /// (HFT90D; Heinzel, Rudiger, Schilling 2002).
    FlatTop,
    /// Kaiser's, with its `beta` (`pi alpha` in Harris 1978): 0 is rectangular, larger trades width
    /// for lower sidelobes.
    Kaiser(f64),
}

impl Window {
    fn cosines(&self) -> Option<&'static [f64]> {
        match self {
            Self::Hann => Some(&[0.5, 0.5]),
            Self::BlackmanHarris => Some(&BLACKMAN_HARRIS),
            Self::FlatTop => Some(&FLAT_TOP),
            Self::Kaiser(_) => None,
        }
    }

    /// The samples of a block of `length`.
    pub fn samples(&self, length: usize) -> Vec<f64> {
        (0..length)
            .map(|n| self.at(n as f64 / length as f64))
            .collect()
    }

    /// The window at `part` of its length, 0 to 1.
    fn at(&self, part: f64) -> f64 {
        match (self.cosines(), self) {
            (Some(terms), _) => {
                let mut sign = 1.0;
                let mut sum = 0.0;
                for (order, term) in terms.iter().enumerate() {
                    sum += sign * term * (TAU * order as f64 * part).cos();
                    sign = -sign;
                }
                sum
            }
            (None, Self::Kaiser(beta)) => {
                let from_centre = 2.0 * part - 1.0;
                bessel_i0(beta * (1.0 - from_centre * from_centre).max(0.0).sqrt())
                    / bessel_i0(*beta)
            }
            (None, _) => 1.0,
        }
    }

    /// Equivalent noise bandwidth in bins, `length sum w^2 / (sum w)^2`, of a long block.
    ///
    /// Exact at any length above twice the number of terms for sums of cosines. For Kaiser's it is
    /// the limit of a long block; [`enbw_of`] of the samples is what a finite block has.
    pub fn enbw_bins(&self) -> f64 {
        match self.cosines() {
            Some(terms) => {
                let mean_square =
                    terms[0] * terms[0] + terms[1..].iter().map(|a| a * a / 2.0).sum::<f64>();
                mean_square / (terms[0] * terms[0])
            }
            // The periodic rule over a window whose ends nearly meet 0; 2^14 points leave a relative
            // error below 1e-8 even for the rectangular one's jump, which it counts exactly.
            None => enbw_of(&self.samples(1 << 14)),
        }
    }

    /// The part by which blocks usefully overlap: beyond it the variance of the mean hardly falls.
    ///
    /// Common practice: 1/2 for Hann, 2/3 for Blackman-Harris, 3/4 for the narrower ones.
    pub fn usual_overlap(&self) -> f64 {
        match *self {
            Self::Hann => 0.5,
            Self::BlackmanHarris => 2.0 / 3.0,
            Self::FlatTop => 0.75,
            Self::Kaiser(beta) if beta < 7.0 => 0.5,
            Self::Kaiser(beta) if beta < 12.0 => 2.0 / 3.0,
            Self::Kaiser(_) => 0.75,
        }
    }
}

/// Equivalent noise bandwidth of `window` in bins: `length sum w^2 / (sum w)^2`.
pub fn enbw_of(window: &[f64]) -> f64 {
    let sum: f64 = window.iter().sum();
    let squares: f64 = window.iter().map(|w| w * w).sum();
    window.len() as f64 * squares / (sum * sum)
}

/// Modified Bessel function of the first kind, order 0: its power series, all terms positive,
/// so the relative error stays near the rounding error.
pub fn bessel_i0(x: f64) -> f64 {
    let quarter = x * x / 4.0;
    let mut term = 1.0;
    let mut sum = 1.0;
    let mut order = 1.0;
    while term > 1e-17 * sum {
        term *= quarter / (order * order);
        sum += term;
        order += 1.0;
    }
    sum
}

/// `sin(pi x) / (pi x)`.
pub fn sinc(x: f64) -> f64 {
    if x.abs() < 1e-9 {
        1.0
    } else {
        (PI * x).sin() / (PI * x)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use num_complex::Complex64;

    /// Response at `bins` from the centre against the centre, dB.
    fn response_db(samples: &[f64], bins: f64) -> f64 {
        let length = samples.len() as f64;
        let sum: Complex64 = samples
            .iter()
            .enumerate()
            .map(|(n, w)| w * Complex64::cis(-TAU * bins * n as f64 / length))
            .sum();
        20.0 * (sum.norm() / samples.iter().sum::<f64>()).log10()
    }

    /// Highest response beyond the first minimum, dB.
    fn sidelobe_db(samples: &[f64]) -> f64 {
        let steps: Vec<f64> = (0..800)
            .map(|step| response_db(samples, step as f64 * 0.05))
            .collect();
        let main = (1..799)
            .find(|&i| steps[i] < steps[i - 1] && steps[i] <= steps[i + 1] && steps[i] < -30.0)
            .unwrap_or(0);
        steps[main..].iter().cloned().fold(f64::MIN, f64::max)
    }

    /// Harris 1978, table 1 (recalled from memory, to the digits printed there): noise bandwidth in
    /// bins, scalloping loss in dB, highest sidelobe in dB.
    #[test]
    fn harris_table_is_met() {
        for (window, enbw, scalloping, sidelobe) in [
            (Window::Hann, 1.50, 1.42, -32.0),
            (Window::BlackmanHarris, 2.00, 0.83, -92.0),
            (Window::Kaiser(2.0 * PI), 1.50, 1.46, -46.0),
            (Window::Kaiser(3.0 * PI), 1.80, 1.02, -69.0),
        ] {
            let samples = window.samples(1024);
            assert!((window.enbw_bins() - enbw).abs() < 0.0051, "{window:?}");
            assert!((enbw_of(&samples) - window.enbw_bins()).abs() < 1e-3);
            let loss = -response_db(&samples, 0.5);
            assert!((loss - scalloping).abs() < 0.0101, "{window:?} {loss}");
            // The table rounds the sidelobes to whole decibels.
            let highest = sidelobe_db(&samples);
            assert!((highest - sidelobe).abs() < 1.0, "{window:?} {highest}");
        }
    }

    #[test]
    fn the_flat_top_is_flat_and_low() {
        let samples = Window::FlatTop.samples(1024);
        let worst = (0..=50)
            .map(|i| response_db(&samples, i as f64 * 0.01).abs())
            .fold(0.0, f64::max);
        // Published: 0.0039 dB, -90.2 dB, 3.8832 bins.
        assert!((worst - 0.0039).abs() < 2e-4, "{worst}");
        let highest = sidelobe_db(&samples);
        assert!((highest + 90.2).abs() < 0.2, "{highest}");
        assert!((Window::FlatTop.enbw_bins() - 3.8832).abs() < 5e-5);
    }

    #[test]
    fn kaiser_of_zero_is_rectangular() {
        assert_eq!(Window::Kaiser(0.0).samples(9), vec![1.0; 9]);
        assert!((Window::Kaiser(0.0).enbw_bins() - 1.0).abs() < 1e-12);
    }

    #[test]
    fn bessel_against_printed_values() {
        // scipy.special.i0 at 1 and 10, SciPy 1.17.1: 1.2660658777520082, 2815.716628466254.
        assert!((bessel_i0(1.0) - 1.2660658777520082).abs() < 1e-15);
        assert!((bessel_i0(10.0) / 2815.716628466254 - 1.0).abs() < 1e-14);
    }
}
