//! A memory polynomial as the front end applies it, with cross terms where it has them.
//!
//! ```text
//! u(n) = sum_i c_i x(n - s_i) |x(n - e_i)|^p_i
//! ```
//!
//! `s = e` is the memory polynomial (L. Ding et al., "A robust digital baseband predistorter constructed using
//! memory polynomials", IEEE Trans. Commun., Jan. 2004); `e` before or after `s` are the cross terms of its
//! generalized form (D. R. Morgan et al., "A generalized memory polynomial model for digital predistortion of
//! RF power amplifiers", IEEE Trans. Signal Process., Oct. 2006). Both from memory.

use num_complex::Complex64;

/// One term: `x(n - signal_lag) |x(n - envelope_lag)|^power`.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
pub struct Term {
    /// Samples by which the signal lags.
    pub signal_lag: usize,
    /// Samples by which the envelope lags.
    pub envelope_lag: usize,
    /// Power of the envelope, 0 for a linear term.
    pub power: u32,
}

impl Term {
    /// Its value at sample `at` of `samples`; zero stands before the first one.
    pub fn value(&self, samples: &[Complex64], at: usize) -> Complex64 {
        let past = |lag: usize| {
            at.checked_sub(lag)
                .map_or(Complex64::ZERO, |at| samples[at])
        };
        past(self.signal_lag) * power(past(self.envelope_lag), self.power)
    }
}

/// `|sample|^power`.
fn power(sample: Complex64, power: u32) -> f64 {
    let square = sample.norm_sqr();
    let even = square.powi((power / 2) as i32);
    if power % 2 == 1 {
        even * square.sqrt()
    } else {
        even
    }
}

/// Terms with their coefficients, applied at `rate` times the signal's rate and held in between.
#[derive(Debug, Clone, PartialEq)]
pub struct Polynomial {
    /// The terms.
    pub terms: Vec<Term>,
    /// As many coefficients, full scale 1.0 in and out.
    pub coefficients: Vec<Complex64>,
    /// Samples by which the output lags so that envelopes ahead of the signal are known.
    pub lead: usize,
    /// How often it is applied, in times the signal's rate: a power of two.
    pub rate: usize,
}

impl Polynomial {
    /// The longest lag of any term, samples.
    pub fn memory(&self) -> usize {
        let lag = |term: &Term| term.signal_lag.max(term.envelope_lag);
        self.terms.iter().map(lag).max().unwrap_or(0)
    }

    /// The output for every sample of `samples`; zero stands before the first one.
    pub fn apply(&self, samples: &[Complex64]) -> Vec<Complex64> {
        let at = |at| {
            let pairs = self.terms.iter().zip(&self.coefficients);
            pairs.map(|(term, c)| c * term.value(samples, at)).sum()
        };
        (0..samples.len()).map(at).collect()
    }

    /// Real multiplications a sample: two for `|x|^2`, one for each further power of the envelope, two a term
    /// beyond power 0 and four for each lag of the signal. Roots of odd powers are not counted.
    pub fn multiplications(&self) -> usize {
        let mut lags: Vec<usize> = self.terms.iter().map(|term| term.signal_lag).collect();
        lags.sort_unstable();
        lags.dedup();
        let mut powers: Vec<u32> = self.terms.iter().map(|term| term.power).collect();
        powers.sort_unstable();
        powers.dedup();
        let bent = self.terms.iter().filter(|term| term.power > 0).count();
        let envelope = if bent == 0 { 0 } else { 2 };
        let further = powers.iter().filter(|&&power| power > 2).count();
        envelope + further + 2 * bent + 4 * lags.len()
    }
}

/// A polynomial at work on a stream.
#[derive(Debug, Clone)]
pub(super) struct PolynomialStream {
    polynomial: Polynomial,
    /// Oldest first, as long as the memory and one more.
    past: Vec<Complex64>,
}

impl PolynomialStream {
    pub(super) fn new(polynomial: &Polynomial) -> Self {
        Self {
            past: vec![Complex64::ZERO; polynomial.memory() + 1],
            polynomial: polynomial.clone(),
        }
    }

    pub(super) fn push(&mut self, sample: Complex64) -> Complex64 {
        self.past.rotate_left(1);
        let last = self.past.len() - 1;
        self.past[last] = sample;
        let pairs = self
            .polynomial
            .terms
            .iter()
            .zip(&self.polynomial.coefficients);
        pairs
            .map(|(term, c)| c * term.value(&self.past, last))
            .sum()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn stream_and_block_agree_and_follow_the_formula() {
        let terms = [(0, 0, 0), (0, 0, 2), (1, 1, 1), (1, 0, 3)].map(
            |(signal_lag, envelope_lag, power)| Term {
                signal_lag,
                envelope_lag,
                power,
            },
        );
        let coefficients = [1.0, -0.2, 0.1, 0.05].map(|re| Complex64::new(re, 0.5 * re));
        let polynomial = Polynomial {
            terms: terms.to_vec(),
            coefficients: coefficients.to_vec(),
            lead: 0,
            rate: 8,
        };
        let x: Vec<_> = (0..20)
            .map(|n| Complex64::from_polar(0.1 * f64::from(n % 7), f64::from(n)))
            .collect();
        let block = polynomial.apply(&x);
        let mut stream = PolynomialStream::new(&polynomial);
        for n in 1..20 {
            let by_hand = coefficients[0] * x[n]
                + coefficients[1] * x[n] * x[n].norm().powi(2)
                + coefficients[2] * x[n - 1] * x[n - 1].norm()
                + coefficients[3] * x[n - 1] * x[n].norm().powi(3);
            assert!((block[n] - by_hand).norm() < 1e-15);
        }
        let streamed: Vec<_> = x.iter().map(|&sample| stream.push(sample)).collect();
        assert_eq!(streamed, block);
        // |x|^2: 2, |x|^3: 1, three bent terms: 6, two lags: 8.
        assert_eq!(polynomial.multiplications(), 17);
    }
}
