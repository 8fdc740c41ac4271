//! How a signal file is written, as its name, its sidecar and the settings say.

use serde::Serialize;

use super::{SignalError, sigmf};
use crate::input::{Problem, Range, Section, nearest};
use crate::units::Dimension;

/// The file formats that hold a signal.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Format {
    /// WAV: stereo is I (left) and Q (right), mono is a pulse sequence.
    Wav,
    /// Text: a header `i,q` and a sample a line, or `time,level` and an edge a line.
    Csv,
    /// Raw interleaved little-endian 32-bit floats, I first.
    Cf32,
    /// Raw interleaved little-endian 16-bit integers, I first.
    Ci16,
    /// NumPy array file, one-dimensional, complex64 or complex128.
    Npy,
    /// A SigMF recording, `NAME.sigmf-meta` beside `NAME.sigmf-data`.
    Sigmf,
}

impl Format {
    /// Every format with its name in settings, which is its extension too but for SigMF's two files.
    pub const ALL: [(&'static str, Self); 6] = [
        ("wav", Self::Wav),
        ("csv", Self::Csv),
        ("cf32", Self::Cf32),
        ("ci16", Self::Ci16),
        ("npy", Self::Npy),
        ("sigmf", Self::Sigmf),
    ];

    /// The name in settings.
    pub fn name(self) -> &'static str {
        Self::ALL
            .iter()
            .find(|(_, format)| *format == self)
            .map_or("", |(name, _)| name)
    }

    /// The format that the extension of `name` stands for.
    ///
    /// # Errors
    /// An extension that stands for none.
    pub fn of_name(name: &str) -> Result<Self, SignalError> {
        let base = name.rsplit(['/', '\\']).next().unwrap_or(name);
        let extension = base
            .rsplit_once('.')
            .map_or(String::new(), |(_, extension)| extension.to_lowercase());
        if sigmf::stem(name).is_some() {
            return Ok(Self::Sigmf);
        }
        if extension == "sigmf" {
            return Err(SignalError::UnknownFormat {
                file: name.to_owned(),
                hint:
                    "; a .sigmf archive must be unpacked (it is a tar file): name its .sigmf-meta"
                        .to_owned(),
            });
        }
        if let Some((_, format)) = Self::ALL.iter().find(|(word, _)| *word == extension) {
            return Ok(*format);
        }
        let words: Vec<&str> = Self::ALL.iter().map(|(word, _)| *word).collect();
        let hint = match nearest(&extension, &words) {
            Some(word) => format!("; did you mean .{word}?"),
            None if matches!(extension.as_str(), "f32" | "fc32" | "cfile" | "raw" | "bin" | "iq" | "dat") => {
                "; raw interleaved 32-bit floats are format = \"cf32\", raw 16-bit integers are format = \"ci16\""
                    .to_owned()
            }
            None => String::new(),
        };
        Err(SignalError::UnknownFormat {
            file: name.to_owned(),
            hint,
        })
    }
}

/// What is stated about a signal file outside of it.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct FormatOptions {
    /// The format; by the file's extension where absent.
    pub format: Option<Format>,
    /// Samples a second, Hz; needed by formats that do not hold it.
    pub rate_hz: Option<f64>,
    /// The number in the file that stands for 1.0. In the file's own numbers: codes for `ci16`
    /// (32768 where absent), the value as read for every other format (1.0 where absent).
    pub full_scale: Option<f64>,
}

impl FormatOptions {
    /// Reads the keys `format`, `rate` and `full_scale` of `section`.
    ///
    /// # Errors
    /// A value that is not allowed, with its place.
    pub fn from_section(section: &Section<'_>) -> Result<Self, Problem> {
        Ok(Self {
            format: section.maybe_choice("format", &Format::ALL)?,
            rate_hz: section.maybe_quantity("rate", Dimension::Frequency, Range::Positive)?,
            full_scale: section.maybe_quantity("full_scale", Dimension::Ratio, Range::Positive)?,
        })
    }

    /// As [`FormatOptions::from_section`] for the table `[signal]` of a study, where `format` may also be a table
    /// that describes the signal itself.
    ///
    /// # Errors
    /// As [`FormatOptions::from_section`].
    pub fn from_study(section: &Section<'_>) -> Result<Self, Problem> {
        if !matches!(section.maybe_section("format"), Ok(Some(_))) {
            return Self::from_section(section);
        }
        Ok(Self {
            format: None,
            rate_hz: section.maybe_quantity("rate", Dimension::Frequency, Range::Positive)?,
            full_scale: section.maybe_quantity("full_scale", Dimension::Ratio, Range::Positive)?,
        })
    }

    /// These options, completed by `other`.
    ///
    /// # Errors
    /// Something that both state, differently (numbers: by more than 1e-9 of themselves).
    pub fn merged(self, other: Self, file: &str) -> Result<Self, SignalError> {
        if let (Some(first), Some(second)) = (self.format, other.format)
            && first != second
        {
            return Err(SignalError::Disagreement {
                file: file.to_owned(),
                what: "the format",
                first: first.name().to_owned(),
                second: second.name().to_owned(),
            });
        }
        Ok(Self {
            format: self.format.or(other.format),
            rate_hz: agree(file, "the sample rate in Hz", self.rate_hz, other.rate_hz)?,
            full_scale: agree(file, "the full scale", self.full_scale, other.full_scale)?,
        })
    }
}

/// The one number that both state.
pub(super) fn agree(
    file: &str,
    what: &'static str,
    first: Option<f64>,
    second: Option<f64>,
) -> Result<Option<f64>, SignalError> {
    match (first, second) {
        (Some(a), Some(b)) if (a - b).abs() > 1e-9 * a.abs() || (a - b).is_nan() => {
            Err(SignalError::Disagreement {
                file: file.to_owned(),
                what,
                first: a.to_string(),
                second: b.to_string(),
            })
        }
        _ => Ok(first.or(second)),
    }
}
