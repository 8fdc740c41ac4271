//! Butterworth low-pass filters on sampled signals that stand for continuous ones.

use std::f64::consts::{PI, TAU};
use std::ops::{AddAssign, Mul};

use super::section::{Output, Section};

/// The highest order on offer.
pub const MAX_ORDER: u32 = 8;

/// A Butterworth low-pass of order 1 to [`MAX_ORDER`], -3 dB at its bandwidth, 1 at direct current.
///
/// Poles at `w exp(j pi (2k + n - 1) / (2n))` (S. Butterworth, "On the theory of filter amplifiers",
/// Wireless Engineer, 1930), as sections of first and second order. Each section is exact for an input that
/// runs straight between samples (ramp-invariant), so the error falls with the square of the sample
/// period, and neither delay nor bandwidth is warped.
#[derive(Debug, Clone)]
pub struct Lowpass<T> {
    sections: Vec<Section<T>>,
}

impl<T> Lowpass<T>
where
    T: Copy + Default + AddAssign + Mul<f64, Output = T>,
{
    /// A filter of `order` with `bandwidth_hz` at `rate_hz`, at rest.
    pub fn new(order: u32, bandwidth_hz: f64, rate_hz: f64) -> Self {
        let order = order.clamp(1, MAX_ORDER);
        let step = TAU * bandwidth_hz / rate_hz;
        let mut sections = Vec::new();
        if order % 2 == 1 {
            sections.push(Section::new(
                [[-1.0, 0.0], [0.0, -1.0]],
                [1.0, 0.0],
                Output::FIRST,
                step,
            ));
        }
        for pair in 0..order / 2 {
            // The pair of poles at the angle theta from the negative axis has 1/Q = 2 cos(theta).
            let from_axis = if order % 2 == 1 {
                PI * f64::from(pair + 1) / f64::from(order)
            } else {
                PI * (f64::from(pair) + 0.5) / f64::from(order)
            };
            let damping = 2.0 * from_axis.cos();
            sections.push(Section::new(
                [[0.0, 1.0], [-1.0, -damping]],
                [0.0, 1.0],
                Output::FIRST,
                step,
            ));
        }
        Self { sections }
    }

    /// Starts from the state in which the constant `value` has always been the input.
    pub fn settle(&mut self, value: T) {
        for section in &mut self.sections {
            section.settle(value, [1.0, 0.0]);
        }
    }

    /// The output at the end of a sample period over which the input had the mean `mean`, as behind a
    /// converter that holds its values: the period's input is taken as constant.
    pub fn push_held(&mut self, mean: T) -> T {
        if let Some(first) = self.sections.first_mut() {
            first.hold(mean);
        }
        self.push(mean)
    }

    /// The output at the instant of `input`.
    pub fn push(&mut self, input: T) -> T {
        self.sections
            .iter_mut()
            .fold(input, |signal, section| section.push(signal))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use num_complex::Complex64;

    /// Gain at `hz` of a filter of `order` with a bandwidth of 1 Hz at 400 samples a second.
    fn gain(order: u32, hz: f64) -> Complex64 {
        let mut filter = Lowpass::new(order, 1.0, 400.0);
        let tone = |n: u32| Complex64::cis(TAU * hz * f64::from(n) / 400.0);
        let mut out = Complex64::ZERO;
        for n in 0..20_000 {
            out = filter.push(tone(n)) / tone(n);
        }
        out
    }

    #[test]
    fn has_the_butterworth_response() {
        for order in 1..=MAX_ORDER {
            for hz in [0.1f64, 0.5, 1.0, 2.0] {
                let expected = 1.0 / (1.0 + hz.powi(2 * order as i32)).sqrt();
                // Straight lines between samples lose (pi f / rate)^2 / 3 of a tone in each of up to
                // four sections: 3e-4 at 2 Hz.
                let got = gain(order, hz).norm();
                assert!(
                    (got / expected - 1.0).abs() < 4e-4,
                    "{order} {hz}: {got} {expected}"
                );
            }
        }
    }

    #[test]
    fn has_the_phase_of_its_poles() {
        // Second order: H = 1 / (1 + sqrt 2 j x - x^2).
        for x in [0.1, 1.0, 3.0] {
            let expected = 1.0 / Complex64::new(1.0 - x * x, 2f64.sqrt() * x);
            let error = (gain(2, x) / expected).arg().abs();
            assert!(error < 1e-3, "{x}: {error}");
        }
    }

    #[test]
    fn a_held_step_is_the_step_response() {
        // Second order, unit step at time 0: 1 - e^(-a) (cos a + sin a), a = w t / sqrt 2.
        let mut filter = Lowpass::<f64>::new(2, 1.0, 50.0);
        filter.settle(0.0);
        for n in 1..200 {
            let a = TAU * f64::from(n) / 50.0 / 2f64.sqrt();
            let expected = 1.0 - (-a).exp() * (a.cos() + a.sin());
            let got = filter.push_held(1.0);
            assert!((got - expected).abs() < 1e-12, "{n}: {got} {expected}");
        }
    }

    #[test]
    fn holds_a_constant_once_settled() {
        for order in 1..=MAX_ORDER {
            let mut filter = Lowpass::<f64>::new(order, 3.0, 10.0);
            filter.settle(0.7);
            for _ in 0..100 {
                assert!((filter.push(0.7) - 0.7).abs() < 1e-12);
            }
        }
    }
}
