//! Filters given by their poles, at work on band-limited samples: exact for every input below 0.4 of the sample rate.
//!
//! ```text
//! H(s) = sum r_k / (s - p_k),   y_k(n + 1) = exp(p_k) y_k(n) + integral of exp(p_k (1 - s)) u(n + s) ds over 0..1
//! ```
//!
//! with the input between samples read through the same kernel that [`super::edges`] uses (times in samples).

use std::f64::consts::PI;

use num_complex::Complex64;

use super::edges::{GAUSS, observer};

/// Samples by which the output lags.
pub const MODAL_LATENCY: usize = HALF - 1;

/// Kernel to each side, samples.
const HALF: usize = 16;

/// Panels of the integral over one sample.
const PANELS: usize = 64;

/// Poles faster than this (a sample) act at once.
const FASTEST: f64 = 60.0;

/// Highest order of [`Prototype`].
pub const MAX_POLES: u32 = 8;

/// A low-pass of unit passband gain: its poles over the band edge in rad/s, and its gain at zero.
#[derive(Debug, Clone, PartialEq)]
pub struct Prototype {
    /// In units of the band edge.
    pub poles: Vec<Complex64>,
    /// Below one where the ripple is at its bottom there.
    pub gain: f64,
}

impl Prototype {
    /// Butterworth: -3 dB at the band edge; poles at `exp(j pi (2k + n - 1) / 2n)` (S. Butterworth, "On the theory of filter
    /// amplifiers", Wireless Engineer, 1930).
    pub fn butterworth(order: u32) -> Self {
        let n = f64::from(order);
        Self {
            poles: (1..=order)
                .map(|k| Complex64::cis(PI * (2.0 * f64::from(k) + n - 1.0) / (2.0 * n)))
                .collect(),
            gain: 1.0,
        }
    }

    /// Chebyshev of the first kind: down by the ripple at the band edge; poles `-sinh(a) sin(t) + j cosh(a) cos(t)`,
    /// `a = asinh(1/e) / n`, `t = pi (2k - 1) / 2n`, `e^2 = 10^(ripple/10) - 1` (as printed in L. Weinberg, "Network
    /// Analysis and Synthesis", 1962; recalled from memory, held against SciPy).
    pub fn chebyshev(order: u32, ripple_db: f64) -> Self {
        let n = f64::from(order);
        let epsilon = (10f64.powf(ripple_db / 10.0) - 1.0).sqrt();
        let a = (1.0 / epsilon).asinh() / n;
        let poles = (1..=order).map(|k| {
            let t = PI * (2.0 * f64::from(k) - 1.0) / (2.0 * n);
            Complex64::new(-a.sinh() * t.sin(), a.cosh() * t.cos())
        });
        Self {
            poles: poles.collect(),
            gain: if order.is_multiple_of(2) {
                1.0 / (1.0 + epsilon * epsilon).sqrt()
            } else {
                1.0
            },
        }
    }

    /// The gain at `x` times the band edge.
    pub fn response(&self, x: f64) -> Complex64 {
        self.poles
            .iter()
            .fold(Complex64::from(self.gain), |gain, pole| {
                gain * -pole / (Complex64::new(0.0, x) - pole)
            })
    }
}

#[derive(Debug, Clone)]
struct Mode {
    decay: Complex64,
    weights: [Complex64; 2 * HALF],
    state: Complex64,
}

/// The filter at work.
#[derive(Debug, Clone)]
pub struct Modal {
    modes: Vec<Mode>,
    /// The last inputs twice, so that the newest `2 HALF` stand in a row.
    history: [Complex64; 4 * HALF],
    at: usize,
}

impl Modal {
    /// `prototype` with its band edge at `edge` rad a sample, at rest.
    pub fn new(prototype: &Prototype, edge: f64) -> Self {
        let poles: Vec<Complex64> = prototype.poles.iter().map(|pole| pole * edge).collect();
        let modes = poles.iter().enumerate().map(|(k, &pole)| {
            let mut residue = Complex64::from(prototype.gain);
            for (j, &other) in poles.iter().enumerate() {
                residue *= -other;
                if j != k {
                    residue /= pole - other;
                }
            }
            Mode::new(pole, residue)
        });
        Self {
            modes: modes.collect(),
            history: [Complex64::ZERO; 4 * HALF],
            at: 0,
        }
    }

    /// The output [`MODAL_LATENCY`] samples ago.
    pub fn push(&mut self, input: Complex64) -> Complex64 {
        let width = 2 * HALF;
        self.history[self.at] = input;
        self.history[self.at + width] = input;
        self.at = (self.at + 1) % width;
        let window = &self.history[self.at..self.at + width];
        let mut output = Complex64::ZERO;
        for mode in &mut self.modes {
            let mut gained = Complex64::ZERO;
            for (sample, weight) in window.iter().zip(&mode.weights) {
                gained += sample * weight;
            }
            mode.state = mode.state * mode.decay + gained;
            output += mode.state;
        }
        output
    }
}

impl Mode {
    fn new(pole: Complex64, residue: Complex64) -> Self {
        let mut weights = [Complex64::ZERO; 2 * HALF];
        if pole.norm() > FASTEST {
            // At once: the value at the end of the sample.
            weights[HALF] = -residue / pole;
            return Self {
                decay: Complex64::ZERO,
                weights,
                state: Complex64::ZERO,
            };
        }
        let panel = 1.0 / PANELS as f64;
        for (tap, weight) in weights.iter_mut().enumerate() {
            // Tap HALF - 1 is the sample at the start of the interval.
            let place = tap as f64 - (HALF - 1) as f64;
            for index in 0..PANELS {
                for (node, part) in GAUSS {
                    let s = (index as f64 + node) * panel;
                    *weight += (pole * (1.0 - s)).exp() * (part * panel * observer(s - place));
                }
            }
            *weight *= residue;
        }
        Self {
            decay: pole.exp(),
            weights,
            state: Complex64::ZERO,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::TAU;

    #[test]
    fn tones_see_the_response_of_the_poles_and_the_stated_delay() {
        for prototype in [
            Prototype::butterworth(1),
            Prototype::butterworth(5),
            Prototype::chebyshev(4, 0.5),
        ] {
            for edge_cycles in [0.002, 0.05, 0.3] {
                let edge = TAU * edge_cycles;
                for cycles in [0.0, 0.3 * edge_cycles, -edge_cycles, 0.37] {
                    let mut filter = Modal::new(&prototype, edge);
                    let tone = |n: f64| Complex64::cis(TAU * cycles * n);
                    let mut last = Complex64::ZERO;
                    let count = 20_000;
                    for n in 0..count {
                        last = filter.push(tone(f64::from(n)));
                    }
                    let at = f64::from(count - 1) - MODAL_LATENCY as f64;
                    let got = last / tone(at);
                    let law = prototype.response(cycles / edge_cycles);
                    // The kernel's 100 dB.
                    assert!(
                        (got - law).norm() < 3e-5,
                        "{edge_cycles} {cycles}: {got} {law}"
                    );
                }
            }
        }
    }

    #[test]
    fn prototypes_are_those_of_scipy() {
        // scipy 1.17.1: b, a = signal.butter(3, 1, analog=True); signal.freqs(b, a, [0.5, 1, 2]) and
        // signal.cheby1(4, 0.5, 1, analog=True); absolute values as printed.
        for (prototype, law) in [
            (
                Prototype::butterworth(3),
                [
                    0.992_277_876_713_667_5,
                    std::f64::consts::FRAC_1_SQRT_2,
                    0.124_034_734_589_208_45,
                ],
            ),
            (
                Prototype::chebyshev(4, 0.5),
                [
                    0.985_088_002_479_309_7,
                    0.944_060_876_285_923_4,
                    0.029_500_301_027_212_947,
                ],
            ),
        ] {
            for (x, law) in [0.5, 1.0, 2.0].into_iter().zip(law) {
                assert!((prototype.response(x).norm() - law).abs() < 1e-12, "{x}");
            }
        }
    }
}
