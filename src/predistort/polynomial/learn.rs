//! Indirect learning: the inverse of the transmitter is fitted behind it and then put in front of it.
//!
//! ```text
//! u_0 = x;   y_i = transmitter(u_i) / G;   P_i = argmin |P(y_i) - u_i|^2;   u_(i+1) = P_i(x)
//! ```
//!
//! C. Eun, E. J. Powers, "A new Volterra predistorter based on the indirect learning architecture", IEEE Trans.
//! Signal Process., Jan. 1997 (from memory). The pass whose output came closest to `x` counts.

use num_complex::Complex64;

use super::choose::{Choice, choose};
use super::fit::{Fit, FitError, fit};
use super::terms::{PolynomialRequest, PolynomialSize};

/// A pass that betters the best one by less than this has stopped helping, dB.
const HELPS_DB: f64 = 0.1;

/// What one pass did.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct LearningPass {
    /// From 0, which is without predistortion.
    pub pass: usize,
    /// Error of the transmitter's output against the wanted signal, over it, in power.
    pub output_nmse_db: f64,
    /// Condition number of the pass's fit; absent for pass 0.
    pub condition: Option<f64>,
    /// Largest magnitude of its coefficients; absent for pass 0.
    pub largest_coefficient: Option<f64>,
    /// Highest magnitude that went into the transmitter, wanted full scale 1.
    pub peak: f64,
}

/// Why learning ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum LearningEnd {
    /// A pass bettered the result by less than 0.1 dB.
    StoppedHelping,
    /// All passes were made, and the last one still helped.
    RanOut,
}

/// What was learned.
#[derive(Debug, Clone, PartialEq)]
pub struct Learned {
    /// The predistorter of the best pass; absent where none betters the plain signal.
    pub fit: Option<Fit>,
    /// Its size.
    pub size: PolynomialSize,
    /// How the size was chosen, where it was not given.
    pub choice: Option<Choice>,
    /// Every pass.
    pub passes: Vec<LearningPass>,
    /// Why it ended.
    pub end: LearningEnd,
}

/// Learns the predistorter for `wanted`. `transmit` gives the transmitter's output for a signal, as long as it,
/// aligned with it in time and divided by the wanted gain. `edge` samples at the start and at the end show the
/// transmitter starting and stopping: nothing is learned from them.
///
/// # Errors
/// What `transmit` says, or [`FitError`].
pub fn learn<E: From<FitError>>(
    request: &PolynomialRequest,
    edge: usize,
    wanted: &[Complex64],
    mut transmit: impl FnMut(&[Complex64]) -> Result<Vec<Complex64>, E>,
) -> Result<Learned, E> {
    let edge = edge.min(wanted.len() / 4);
    let inside = edge..wanted.len() - edge;
    let wanted_inside = &wanted[inside.clone()];
    let mut input = wanted.to_vec();
    let mut output = transmit(&input)?;
    let (size, choice) = match request.size {
        Some(size) => (size, None),
        None => {
            let choice = choose(
                request.form,
                request.ridge,
                &output[inside.clone()],
                &input[inside.clone()],
            )?;
            (choice.chosen, Some(choice))
        }
    };
    let mut best = nmse_db(wanted_inside, &output[inside.clone()]);
    let mut passes = vec![LearningPass {
        pass: 0,
        output_nmse_db: best,
        condition: None,
        largest_coefficient: None,
        peak: peak(wanted_inside),
    }];
    let mut learned = None;
    let mut end = LearningEnd::RanOut;
    for pass in 1..=request.passes {
        let found = fit(
            &size,
            request.rate,
            request.ridge,
            &output[inside.clone()],
            &input[inside.clone()],
        )?;
        input = without_lead(&found.polynomial.apply(wanted), size.lead());
        output = transmit(&input)?;
        let reached = nmse_db(wanted_inside, &output[inside.clone()]);
        passes.push(LearningPass {
            pass,
            output_nmse_db: reached,
            condition: Some(found.condition),
            largest_coefficient: Some(found.largest_coefficient),
            peak: peak(&input[inside.clone()]),
        });
        let helped = best - reached;
        if helped > 0.0 {
            (best, learned) = (reached, Some(found));
        }
        if helped.is_nan() || helped < HELPS_DB {
            end = LearningEnd::StoppedHelping;
            break;
        }
    }
    Ok(Learned {
        fit: learned,
        size,
        choice,
        passes,
        end,
    })
}

/// The signal moved back by `lead` samples, zero at its end.
fn without_lead(samples: &[Complex64], lead: usize) -> Vec<Complex64> {
    let mut moved = samples[lead.min(samples.len())..].to_vec();
    moved.resize(samples.len(), Complex64::ZERO);
    moved
}

fn peak(samples: &[Complex64]) -> f64 {
    samples
        .iter()
        .map(|sample| sample.norm())
        .fold(0.0, f64::max)
}

/// Error of `output` against `wanted` once one complex gain is taken off, over `wanted`, in power.
fn nmse_db(wanted: &[Complex64], output: &[Complex64]) -> f64 {
    let pairs = || wanted.iter().zip(output);
    let square: f64 = wanted.iter().map(Complex64::norm_sqr).sum();
    let gain = pairs().map(|(x, y)| x.conj() * y).sum::<Complex64>() / square;
    let missed: f64 = pairs().map(|(x, y)| (y - gain * x).norm_sqr()).sum();
    10.0 * (missed / (square * gain.norm_sqr())).log10()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::predistort::polynomial::Form;

    #[test]
    fn a_bent_transmitter_with_memory_is_undone_pass_by_pass() {
        let wanted: Vec<_> = (0..4000)
            .map(|n| {
                let t = f64::from(n);
                Complex64::new(
                    (0.031 * t).sin() + 0.5 * (0.0712 * t).cos(),
                    0.6 * (0.0533 * t).sin(),
                ) / 2.0
            })
            .collect();
        let transmit = |u: &[Complex64]| -> Result<Vec<Complex64>, FitError> {
            let past = |n: usize| if n == 0 { Complex64::ZERO } else { u[n - 1] };
            Ok((0..u.len())
                .map(|n| {
                    let bent = u[n] * (1.0 - Complex64::new(0.15, 0.1) * u[n].norm_sqr());
                    bent + 0.04 * past(n) * past(n).norm()
                })
                .collect())
        };
        for form in [Form::Memory, Form::Cross] {
            let request = PolynomialRequest {
                form,
                size: Some(PolynomialSize {
                    form,
                    power: 6,
                    memory: 2,
                    cross: 1,
                }),
                passes: 6,
                ridge: 0.0,
                rate: 8,
                coefficient_bits: None,
            };
            let learned = learn(&request, 10, &wanted, transmit).unwrap();
            let (first, last) = (learned.passes[0], learned.passes[learned.passes.len() - 1]);
            assert!(first.output_nmse_db > -35.0, "{first:?}");
            assert!(
                last.output_nmse_db < first.output_nmse_db - 30.0,
                "{:?}",
                learned.passes
            );
            assert!(learned.fit.is_some());
        }
    }

    #[test]
    fn a_straight_transmitter_is_left_alone() {
        let wanted: Vec<_> = (0..500)
            .map(|n| Complex64::cis(f64::from(n * n) * 0.001))
            .collect();
        let request = PolynomialRequest {
            form: Form::Memory,
            size: Some(PolynomialSize {
                form: Form::Memory,
                power: 0,
                memory: 0,
                cross: 0,
            }),
            passes: 4,
            ridge: 0.0,
            rate: 8,
            coefficient_bits: None,
        };
        let noisy = |u: &[Complex64]| -> Result<Vec<Complex64>, FitError> {
            Ok(u.iter()
                .enumerate()
                .map(|(n, x)| x + 0.01 * Complex64::cis((n * n * n) as f64))
                .collect())
        };
        let learned = learn(&request, 10, &wanted, noisy).unwrap();
        assert_eq!(learned.end, LearningEnd::StoppedHelping);
        assert_eq!(learned.passes.len(), 2);
    }
}
