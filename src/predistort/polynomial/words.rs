//! Coefficients as words of the hardware: one common exponent, two's complement of `B` bits each.
//!
//! ```text
//! step = 2^(e - B + 1)        e: the smallest with |re|, |im| <= (2^(B-1) - 1) step for all
//! word = round(c / step)      halves away from zero; real and imaginary part alike
//! ```

use num_complex::Complex64;

use crate::drive::Polynomial;

/// Rounding must stay this far below what the polynomial leaves, dB: it then costs less than 0.05 dB.
const BELOW_DB: f64 = 20.0;

/// Allowed widths of a coefficient's words.
pub const COEFFICIENT_BITS: (u32, u32) = (4, 32);

/// How coefficients are held.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
pub struct CoefficientWords {
    /// Bits of each part, sign included.
    pub bits: u32,
    /// The step is 2^(exponent - bits + 1).
    pub exponent: i32,
}

impl CoefficientWords {
    /// The words of `bits` that hold all of `coefficients`.
    pub fn for_all(bits: u32, coefficients: &[Complex64]) -> Self {
        let largest = coefficients
            .iter()
            .map(|c| c.re.abs().max(c.im.abs()))
            .fold(f64::MIN_POSITIVE, f64::max);
        let mut words = Self {
            bits,
            exponent: largest.log2().ceil() as i32,
        };
        // Rounding upwards at the very top needs the next exponent.
        if (largest / words.step()).round() > f64::from(words.top()) {
            words.exponent += 1;
        }
        words
    }

    /// One step.
    pub fn step(&self) -> f64 {
        2f64.powi(self.exponent - self.bits as i32 + 1)
    }

    fn top(&self) -> i32 {
        ((1i64 << (self.bits - 1)) - 1) as i32
    }

    /// The words of one coefficient: real and imaginary part.
    pub fn words(&self, c: Complex64) -> (i32, i32) {
        let word = |part: f64| {
            let top = f64::from(self.top());
            (part / self.step()).round().clamp(-top - 1.0, top) as i32
        };
        (word(c.re), word(c.im))
    }

    /// What the words stand for.
    pub fn value(&self, (re, im): (i32, i32)) -> Complex64 {
        Complex64::new(f64::from(re), f64::from(im)) * self.step()
    }

    /// `polynomial` with its coefficients rounded to words.
    pub fn rounded(&self, polynomial: &Polynomial) -> Polynomial {
        Polynomial {
            coefficients: polynomial
                .coefficients
                .iter()
                .map(|&c| self.value(self.words(c)))
                .collect(),
            ..polynomial.clone()
        }
    }
}

/// The fewest bits whose rounding moves the polynomial's output for `signal` by 20 dB less than `left_db`, what it
/// leaves; the most bits allowed where none does.
pub fn fewest_bits(polynomial: &Polynomial, signal: &[Complex64], left_db: f64) -> u32 {
    let exact = polynomial.apply(signal);
    let power: f64 = exact.iter().map(Complex64::norm_sqr).sum();
    let moved_db = |bits| {
        let words = CoefficientWords::for_all(bits, &polynomial.coefficients);
        let moved: f64 = words
            .rounded(polynomial)
            .apply(signal)
            .iter()
            .zip(&exact)
            .map(|(a, b)| (a - b).norm_sqr())
            .sum();
        10.0 * (moved / power).log10()
    };
    (COEFFICIENT_BITS.0..COEFFICIENT_BITS.1)
        .find(|&bits| moved_db(bits) <= left_db - BELOW_DB)
        .unwrap_or(COEFFICIENT_BITS.1)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::drive::Term;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn words_hold_every_coefficient_to_half_a_step(
            parts in prop::collection::vec((-1e3f64..1e3, -1e3f64..1e3), 1..20),
            bits in 4u32..=32,
        ) {
            let coefficients: Vec<_> = parts.iter().map(|&(re, im)| Complex64::new(re, im)).collect();
            let words = CoefficientWords::for_all(bits, &coefficients);
            for c in coefficients {
                let held = words.value(words.words(c));
                // Half a step, and the last digits of the quotient.
                let allowed = 0.5 * words.step() * (1.0 + 1e-6);
                prop_assert!((held.re - c.re).abs() <= allowed && (held.im - c.im).abs() <= allowed);
                prop_assert_eq!(words.value(words.words(held)), held);
            }
        }
    }

    #[test]
    fn large_coefficients_that_cancel_need_more_bits() {
        let term = |power| Term {
            signal_lag: 0,
            envelope_lag: 0,
            power,
        };
        let polynomial = |large: f64| Polynomial {
            terms: vec![term(0), term(1), term(2)],
            coefficients: [1.0, large, -large].map(Complex64::from).to_vec(),
            lead: 0,
            rate: 1,
        };
        let signal: Vec<_> = (0..500)
            .map(|n| Complex64::from_polar(f64::from(n) / 500.0, f64::from(n)))
            .collect();
        let few = fewest_bits(&polynomial(0.1), &signal, -40.0);
        // No short word holds a hundred and a third exactly.
        let many = fewest_bits(&polynomial(100.0 + 1.0 / 3.0), &signal, -40.0);
        // -60 dB is about ten bits; the output of a hundred cancelling stays within 25.
        assert!((8..=12).contains(&few), "{few}");
        assert!(many > few, "{many} {few}");
    }
}
