//! What can go wrong where an output is held against its reference.

/// Why an output cannot be aligned with its reference or held against it.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum PairError {
    /// Pieces of unequal length.
    #[error(
        "{reference} samples of the reference came with {output} of the output: they must come in equal numbers"
    )]
    Uneven {
        /// Samples of the reference.
        reference: usize,
        /// Samples of the output.
        output: usize,
    },
    /// A sample rate that is none.
    #[error("a sample rate of {given_hz} Hz: it must be positive and finite")]
    Rate {
        /// Rate given, Hz.
        given_hz: f64,
    },
    /// A search range without meaning or too long to hold.
    #[error(
        "a search for delays up to {given_s} s: 0 to {longest_s} s is possible at this sample rate"
    )]
    Search {
        /// Longest delay given, s.
        given_s: f64,
        /// Longest possible, s.
        longest_s: f64,
    },
    /// Too few samples for the search range or the filter.
    #[error(
        "{given} samples are too few to compare: {needed} are needed for this search range and band"
    )]
    TooShort {
        /// Samples that came.
        given: u64,
        /// Samples needed.
        needed: u64,
    },
    /// One of the streams holds no power.
    #[error("the {stream} is silent where both streams overlap")]
    Silent {
        /// `reference` or `output`.
        stream: &'static str,
    },
    /// The output does not resemble the reference.
    #[error(
        "the output does not follow the reference: their correlation is {correlation:.3}, at least {least} is needed; do both files belong together, and is the search range long enough?"
    )]
    Unrelated {
        /// Largest correlation found, 0 to 1.
        correlation: f64,
        /// Least accepted.
        least: f64,
    },
    /// The best delay lies at the end of the search range.
    #[error("the best delay found, {delay_s} s, is the end of the search range: search further")]
    SearchEnd {
        /// Delay found, s.
        delay_s: f64,
    },
    /// A band that the streams do not hold, or too narrow to filter.
    #[error(
        "an EVM bandwidth of {given_hz} Hz: {narrowest_hz} Hz to {widest_hz} Hz is possible at this sample rate"
    )]
    Band {
        /// Band given, Hz.
        given_hz: f64,
        /// Narrowest possible, Hz.
        narrowest_hz: f64,
        /// Widest possible, Hz.
        widest_hz: f64,
    },
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::metrics::{Alignment, AlignmentMeter, ErrorMeter};
    use num_complex::Complex64;

    /// A white sequence, another for each seed.
    fn noise(count: usize, seed: u64) -> Vec<Complex64> {
        let mut state = seed;
        let mut draw = || {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1_442_695_040_888_963_407);
            (state >> 11) as f64 * 2_f64.powi(-53) - 0.5
        };
        (0..count).map(|_| Complex64::new(draw(), draw())).collect()
    }

    fn aligned(x: &[Complex64], y: &[Complex64], search_s: f64) -> Result<Alignment, PairError> {
        let mut meter = AlignmentMeter::new(1e6, search_s)?;
        meter.push(x, y)?;
        meter.finish()
    }

    #[test]
    fn what_cannot_be_aligned_is_said() {
        let x = noise(20_000, 1);
        let silence = vec![Complex64::ZERO; x.len()];
        let silent = |stream| Err(PairError::Silent { stream });
        assert_eq!(aligned(&x, &silence, 1e-5), silent("output"));
        assert_eq!(aligned(&silence, &x, 1e-5), silent("reference"));
        let other = aligned(&x, &noise(20_000, 2), 1e-5);
        assert!(matches!(other, Err(PairError::Unrelated { .. })));
        let few = aligned(&x[..300], &x[..300], 50e-6);
        assert!(matches!(few, Err(PairError::TooShort { given: 300, .. })));
        // 51 samples late, searched up to 50 and one for rounding: the best is the end of the range.
        let late = aligned(&x[51..], &x[..x.len() - 51], 50e-6);
        assert!(matches!(late, Err(PairError::SearchEnd { .. })));
        for (rate_hz, search_s) in [
            (0.0, 1.0),
            (f64::NAN, 1.0),
            (1e6, -1.0),
            (1e6, f64::NAN),
            (1e9, 1.0),
        ] {
            assert!(AlignmentMeter::new(rate_hz, search_s).is_err());
        }
    }

    #[test]
    fn what_cannot_be_compared_is_said() {
        let alignment = Alignment {
            delay_s: 0.0,
            gain: Complex64::ONE,
            correlation: 1.0,
            samples: 1,
        };
        for band_hz in [0.0, -1.0, f64::NAN, 2e6, 1.0] {
            let meter = ErrorMeter::new(alignment, 1e6, Some(band_hz));
            assert!(matches!(meter, Err(PairError::Band { .. })));
        }
        for gain in [Complex64::ZERO, Complex64::new(f64::NAN, 0.0)] {
            assert!(ErrorMeter::new(Alignment { gain, ..alignment }, 1e6, None).is_err());
        }
        let x = noise(300, 3);
        let compared = |x: &[Complex64], y: &[Complex64]| {
            let mut meter = ErrorMeter::new(alignment, 1e6, None)?;
            meter.push(x, y)?;
            meter.finish()
        };
        let uneven = PairError::Uneven {
            reference: 2,
            output: 1,
        };
        assert_eq!(compared(&x[..2], &x[..1]), Err(uneven));
        let short = PairError::TooShort {
            given: 256,
            needed: 257,
        };
        assert_eq!(compared(&x[..256], &x[..256]), Err(short));
        assert!(compared(&x[..257], &x[..257]).is_ok());
    }
}
