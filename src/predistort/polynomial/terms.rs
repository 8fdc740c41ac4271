//! Which terms a polynomial has.
//!
//! ```text
//! memory   x(n - m) |x(n - m)|^k                m = 0..M, k = 0..K
//! cross    and x(n - m) |x(n - m - l)|^k, x(n - m) |x(n - m + l)|^k     l = 1..L, k = 1..K
//! ```

use crate::drive::Term;

/// Which of the two forms.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Form {
    /// Signal and envelope lag alike.
    Memory,
    /// Envelopes before and after the signal as well.
    Cross,
}

/// How many terms.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
pub struct PolynomialSize {
    /// The form.
    pub form: Form,
    /// Highest power of the envelope, K: the order is one more.
    pub power: u32,
    /// Longest lag of the signal, M.
    pub memory: usize,
    /// Farthest cross term, L; without meaning for the memory form.
    pub cross: usize,
}

impl PolynomialSize {
    /// Highest allowed power, memory and cross.
    pub const HIGHEST: (u32, usize, usize) = (12, 16, 8);

    /// Samples by which the polynomial's output lags.
    pub fn lead(&self) -> usize {
        match self.form {
            Form::Memory => 0,
            Form::Cross => self.cross,
        }
    }

    /// Its terms: lags first, then powers, cross terms last.
    pub fn terms(&self) -> Vec<Term> {
        let lead = self.lead();
        let mut terms = Vec::new();
        for signal_lag in lead..=lead + self.memory {
            for power in 0..=self.power {
                terms.push(Term {
                    signal_lag,
                    envelope_lag: signal_lag,
                    power,
                });
            }
        }
        for apart in 1..=lead {
            for signal_lag in lead..=lead + self.memory {
                for envelope_lag in [signal_lag + apart, signal_lag - apart] {
                    for power in 1..=self.power {
                        terms.push(Term {
                            signal_lag,
                            envelope_lag,
                            power,
                        });
                    }
                }
            }
        }
        terms
    }
}

/// A polynomial to be learned.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct PolynomialRequest {
    /// The form.
    pub form: Form,
    /// Its size; chosen by cross-validation where absent.
    pub size: Option<PolynomialSize>,
    /// Most passes of indirect learning.
    pub passes: usize,
    /// Ridge, against columns of norm one; 0 for none.
    pub ridge: f64,
    /// How often it is applied, in times the signal's rate: a power of two.
    pub rate: usize,
    /// Bits of each part of a coefficient; the fewest that do no harm where absent.
    pub coefficient_bits: Option<u32>,
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn terms_are_those_of_the_formula() {
        let size = PolynomialSize {
            form: Form::Memory,
            power: 4,
            memory: 2,
            cross: 3,
        };
        let terms = size.terms();
        assert_eq!((terms.len(), size.lead()), (15, 0));
        assert!(
            terms
                .iter()
                .all(|term| term.signal_lag == term.envelope_lag)
        );
        let size = PolynomialSize {
            form: Form::Cross,
            power: 3,
            memory: 1,
            cross: 1,
        };
        let mut terms = size.terms();
        // 2 lags of 4 powers; 2 lags, both sides, 3 powers.
        assert_eq!((terms.len(), size.lead()), (8 + 12, 1));
        assert_eq!(
            terms[0],
            Term {
                signal_lag: 1,
                envelope_lag: 1,
                power: 0
            }
        );
        assert!(terms.contains(&Term {
            signal_lag: 1,
            envelope_lag: 0,
            power: 3
        }));
        terms.sort_by_key(|term| (term.signal_lag, term.envelope_lag, term.power));
        terms.dedup();
        assert_eq!(terms.len(), 20);
    }
}
