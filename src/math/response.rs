//! A low-pass response given by its poles and zeros, on sampled signals that stand for continuous ones.
//!
//! ```text
//! H(s) = product (1 - s/z) / product (1 - s/p),   H(0) = 1
//! ```
//! as sections of first and second order, each exact for an input that runs straight between samples.

use std::ops::{AddAssign, Mul};

use num_complex::Complex64;

use super::section::{Output, Section};

/// The most poles on offer.
pub const MAX_POLES: usize = 8;

/// Poles and zeros, rad/s, one of each conjugate pair: that with the imaginary part above zero.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Roots {
    roots: [Complex64; MAX_POLES],
    given: usize,
}

impl Roots {
    /// `roots`; those past [`MAX_POLES`] are left out, which [`Roots::count`] of the input tells beforehand.
    pub fn new(roots: &[Complex64]) -> Self {
        let mut made = Self::default();
        for (slot, root) in made.roots.iter_mut().zip(roots) {
            *slot = Complex64::new(root.re, root.im.abs());
        }
        made.given = roots.len().min(MAX_POLES);
        made
    }

    /// As given: one of each pair.
    pub fn as_slice(&self) -> &[Complex64] {
        &self.roots[..self.given]
    }

    /// How many there are, both of each pair counted.
    pub fn count(&self) -> usize {
        self.as_slice().iter().map(size).sum()
    }

    /// The largest magnitude, rad/s; 0 without any.
    pub fn fastest(&self) -> f64 {
        self.as_slice()
            .iter()
            .map(|root| root.norm())
            .fold(0.0, f64::max)
    }

    /// The smallest distance from the imaginary axis, rad/s; infinite without any.
    pub fn slowest(&self) -> f64 {
        let roots = self.as_slice().iter();
        roots
            .map(|root| root.re.abs())
            .fold(f64::INFINITY, f64::min)
    }
}

/// 2 for one of a pair, 1 for a real root.
fn size(root: &Complex64) -> usize {
    if root.im > 0.0 { 2 } else { 1 }
}

/// Coefficients of `1 + first s + second s^2` with these roots.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Factor {
    first: f64,
    second: f64,
}

impl Factor {
    const ONE: Self = Self {
        first: 0.0,
        second: 0.0,
    };

    fn of(roots: &[Complex64]) -> Self {
        match roots {
            [pair] if pair.im > 0.0 => Self {
                first: -2.0 * pair.re / pair.norm_sqr(),
                second: 1.0 / pair.norm_sqr(),
            },
            [one] => Self {
                first: -1.0 / one.re,
                second: 0.0,
            },
            [one, other] => Self {
                first: -1.0 / one.re - 1.0 / other.re,
                second: 1.0 / (one.re * other.re),
            },
            _ => Self::ONE,
        }
    }
}

/// The response at work at one sample rate.
#[derive(Debug, Clone)]
pub struct Response<T> {
    sections: Vec<(Section<T>, [f64; 2])>,
}

impl<T> Response<T>
where
    T: Copy + Default + AddAssign + Mul<f64, Output = T>,
{
    /// The response with `poles`, all left of the imaginary axis, and at most as many `zeros`, at `rate_hz`; at rest.
    pub fn new(poles: &Roots, zeros: &Roots, rate_hz: f64) -> Self {
        let step_s = 1.0 / rate_hz;
        let sections = factors(poles, zeros)
            .into_iter()
            .map(|(below, above)| section(below, above, step_s))
            .collect();
        Self { sections }
    }

    /// Starts from the state in which the constant `value` has always been the input.
    pub fn settle(&mut self, value: T) {
        for (section, settled) in &mut self.sections {
            section.settle(value, *settled);
        }
    }

    /// The output at the end of a sample period over which the input was `mean`.
    pub fn push_held(&mut self, mean: T) -> T {
        if let Some((first, _)) = self.sections.first_mut() {
            first.hold(mean);
        }
        self.push(mean)
    }

    /// The output at the instant of `input`.
    pub fn push(&mut self, input: T) -> T {
        self.sections
            .iter_mut()
            .fold(input, |signal, (section, _)| section.push(signal))
    }
}

/// Denominators and numerators of the sections: pairs by themselves, real roots two by two, no numerator of a
/// higher order than its denominator.
fn factors(poles: &Roots, zeros: &Roots) -> Vec<(Factor, Factor)> {
    let split = |roots: &Roots| -> (Vec<Complex64>, Vec<Complex64>) {
        roots.as_slice().iter().partition(|root| root.im > 0.0)
    };
    let (pole_pairs, poles) = split(poles);
    let (zero_pairs, mut zeros) = split(zeros);
    let mut below: Vec<(Factor, usize)> = pole_pairs
        .iter()
        .map(|pair| (Factor::of(&[*pair]), 2))
        .collect();
    below.extend(poles.chunks(2).map(|few| (Factor::of(few), few.len())));
    let mut zero_pairs = zero_pairs.into_iter();
    below
        .into_iter()
        .map(|(factor, order)| {
            let pair = if order == 2 { zero_pairs.next() } else { None };
            let above = match pair {
                Some(pair) => Factor::of(&[pair]),
                None => Factor::of(&zeros.split_off(zeros.len().saturating_sub(order))),
            };
            (factor, above)
        })
        .collect()
}

/// `(1 + n1 s + n2 s^2) / (1 + d1 s + d2 s^2)` in time scaled so that the denominator's last coefficient is one.
fn section<T>(below: Factor, above: Factor, step_s: f64) -> (Section<T>, [f64; 2])
where
    T: Copy + Default + AddAssign + Mul<f64, Output = T>,
{
    if below.second == 0.0 {
        // w' = u - w in units of d1; y = w + n1 w' = (1 - n1) w + n1 u.
        let ratio = above.first / below.first;
        let output = Output {
            state: [1.0 - ratio, 0.0],
            through: ratio,
        };
        let a = [[-1.0, 0.0], [0.0, -1.0]];
        let section = Section::new(a, [1.0, 0.0], output, step_s / below.first);
        return (section, [1.0, 0.0]);
    }
    let unit_s = below.second.sqrt();
    let damping = below.first / unit_s;
    let (first, second) = (above.first / unit_s, above.second / below.second);
    // w'' = u - w - damping w'; y = w + n1 w' + n2 w''.
    let output = Output {
        state: [1.0 - second, first - second * damping],
        through: second,
    };
    let a = [[0.0, 1.0], [-1.0, -damping]];
    let section = Section::new(a, [0.0, 1.0], output, step_s / unit_s);
    (section, [1.0, 0.0])
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::TAU;

    /// `H` at `hz` by its definition.
    fn defined(poles: &[Complex64], zeros: &[Complex64], hz: f64) -> Complex64 {
        let s = Complex64::new(0.0, TAU * hz);
        let product = |roots: &[Complex64]| {
            roots.iter().fold(Complex64::ONE, |product, root| {
                let one = product * (1.0 - s / root);
                if root.im > 0.0 {
                    one * (1.0 - s / root.conj())
                } else {
                    one
                }
            })
        };
        product(zeros) / product(poles)
    }

    fn measured(poles: &[Complex64], zeros: &[Complex64], hz: f64) -> Complex64 {
        let rate_hz = 4000.0;
        let mut response = Response::new(&Roots::new(poles), &Roots::new(zeros), rate_hz);
        let tone = |n: u32| Complex64::cis(TAU * hz * f64::from(n) / rate_hz);
        let mut out = Complex64::ZERO;
        for n in 0..40_000 {
            out = response.push(tone(n)) / tone(n);
        }
        out
    }

    #[test]
    fn every_mixture_of_roots_has_its_response() {
        let real = |hz: f64| Complex64::new(-TAU * hz, 0.0);
        let pair = |hz: f64, q: f64| {
            let re = -TAU * hz / (2.0 * q);
            Complex64::new(re, ((TAU * hz).powi(2) - re * re).sqrt())
        };
        let right = Complex64::new(TAU * 9.0, 0.0);
        let cases: [(&[Complex64], &[Complex64]); 7] = [
            (&[real(1.0)], &[]),
            (&[real(1.0)], &[real(7.0)]),
            (&[real(1.0), real(20.0)], &[right]),
            (&[pair(3.0, 2.0)], &[pair(12.0, 5.0)]),
            (
                &[real(2.0), pair(5.0, 0.9), real(2.0)],
                &[pair(8.0, 0.8), right, real(3.0)],
            ),
            (&[pair(3.0, 0.7), pair(3.0, 0.7), real(6.0)], &[real(11.0)]),
            (
                &[real(1.0), real(2.0), real(4.0)],
                &[pair(5.0, 1.0), real(9.0)],
            ),
        ];
        for (index, (poles, zeros)) in cases.into_iter().enumerate() {
            for hz in [0.2, 2.0, 6.0, 15.0] {
                let expected = defined(poles, zeros, hz);
                // Straight lines between samples lose (pi f / rate)^2 / 3 of a tone in each of up to three
                // sections: 1.4e-4 at 15 Hz.
                let error = (measured(poles, zeros, hz) / expected - 1.0).norm();
                assert!(error < 2e-4, "case {index} at {hz} Hz: {error:e}");
            }
        }
    }

    #[test]
    fn a_constant_is_settled_from_the_first_sample() {
        let poles = Roots::new(&[Complex64::new(-3.0, 4.0), Complex64::new(-9.0, 0.0)]);
        let zeros = Roots::new(&[Complex64::new(5.0, 0.0)]);
        let mut response = Response::<f64>::new(&poles, &zeros, 10.0);
        response.settle(0.7);
        for _ in 0..50 {
            assert!((response.push(0.7) - 0.7).abs() < 1e-12);
        }
        assert_eq!(
            (poles.count(), poles.fastest(), poles.slowest()),
            (3, 9.0, 3.0)
        );
    }
}
