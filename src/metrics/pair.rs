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
