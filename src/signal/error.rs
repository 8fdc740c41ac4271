//! What can be wrong with a signal file or with a request for a signal.

use crate::input::Problem;

/// Why a signal could not be read, made or written.
#[derive(Debug, thiserror::Error)]
pub enum SignalError {
    /// The resampler refused its own settings.
    #[error("resampling failed: {0}")]
    Resampling(String),
    /// The operating system refused to read or write.
    #[error("{file}: reading or writing failed after {samples} samples: {cause}")]
    Io {
        /// The file, as the user named it.
        file: String,
        /// Samples delivered before the failure.
        samples: u64,
        /// The system's own words.
        cause: std::io::Error,
    },
    /// The file cannot be opened.
    #[error("{file}: cannot be opened: {cause}")]
    Open {
        /// The file, as the user named it.
        file: String,
        /// The system's own words.
        cause: std::io::Error,
    },
    /// Neither the file's name nor the settings say how it is written.
    #[error(
        "{file}: the name does not say the format; allowed extensions: .wav, .csv, .cf32, .ci16, .npy, .sigmf-meta; or state `format`{hint}"
    )]
    UnknownFormat {
        /// The file, as the user named it.
        file: String,
        /// What to try, with its own punctuation; may be empty.
        hint: String,
    },
    /// A binary file that is not what its name or header says.
    #[error("{file}: given {given}; allowed: {allowed}")]
    Malformed {
        /// The file, as the user named it.
        file: String,
        /// What stands there.
        given: String,
        /// What may stand there.
        allowed: String,
    },
    /// A line of a text file that is no sample.
    #[error("{file}:{line}: given {given}; allowed: {allowed}")]
    Line {
        /// The file, as the user named it.
        file: String,
        /// From 1.
        line: u64,
        /// What stands there.
        given: String,
        /// What may stand there.
        allowed: String,
    },
    /// The file's size and what it says about its own length cannot both be true.
    #[error("{file}: an impossible length: {given}; {allowed}")]
    ImpossibleLength {
        /// The file, as the user named it.
        file: String,
        /// What the file says or is.
        given: String,
        /// What it would have to be, and what to do.
        allowed: String,
    },
    /// The file holds no sample at all.
    #[error("{file}: no samples; a signal needs at least one")]
    Empty {
        /// The file, as the user named it.
        file: String,
    },
    /// A sample is infinite or not a number.
    #[error("{file}: sample {sample} (counted from 0) is {given}; allowed: finite numbers")]
    NotFinite {
        /// The file, as the user named it.
        file: String,
        /// From 0.
        sample: u64,
        /// The sample.
        given: String,
    },
    /// Nothing says how many samples make a second.
    #[error(
        "{file}: the sample rate is not known: the format does not hold it; state `rate` with the signal, or in {file}.toml (rate = \"48 kHz\")"
    )]
    MissingRate {
        /// The file, as the user named it.
        file: String,
    },
    /// The same thing is stated twice, differently.
    #[error(
        "{file}: {what} is stated twice and differs: {first} and {second}; allowed: one of them, or the same twice"
    )]
    Disagreement {
        /// The file, as the user named it.
        file: String,
        /// What is stated.
        what: &'static str,
        /// Once.
        first: String,
        /// And again.
        second: String,
    },
    /// The file beside the signal that states its rate and format is wrong.
    #[error(transparent)]
    Sidecar(#[from] Problem),
    /// A request for a signal that cannot be made.
    #[error("{parameter}: given {given}; allowed: {allowed}")]
    Recipe {
        /// The parameter.
        parameter: &'static str,
        /// As given.
        given: String,
        /// What it may be.
        allowed: String,
    },
    /// A format that cannot hold this signal.
    #[error("this format cannot hold {given}; allowed: {allowed}")]
    Unwritable {
        /// What was to be written.
        given: String,
        /// What can be, and what to do.
        allowed: String,
    },
}
