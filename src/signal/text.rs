//! Text files of two columns, read line by line with the line's number in every complaint.

use std::io::{self, BufReader, Read, Seek, SeekFrom};

use num_complex::Complex64;

use super::{SignalError, Source};
use crate::input::ReadSeek;

/// The longest line that is read; two numbers need about 50 bytes.
const MOST_LINE_BYTES: usize = 4096;

/// Two columns of numbers under a header that names them.
pub(super) struct Columns {
    file: String,
    names: [&'static str; 2],
    swapped: bool,
    rows: csv::Reader<ShortLines>,
    record: csv::StringRecord,
    first: csv::Position,
    read: u64,
}

impl Columns {
    /// Reads the header, `names` in either order, and looks at the first row.
    pub(super) fn new(
        reader: Box<dyn ReadSeek>,
        file: &str,
        names: [&'static str; 2],
        hint: &str,
    ) -> Result<Self, SignalError> {
        let mut rows = csv::ReaderBuilder::new()
            .has_headers(false)
            .quoting(false)
            .flexible(true)
            .trim(csv::Trim::All)
            .comment(Some(b'#'))
            .from_reader(ShortLines {
                reader: BufReader::with_capacity(1 << 16, reader),
                line: 0,
            });
        let mut record = csv::StringRecord::new();
        let there = rows
            .read_record(&mut record)
            .map_err(|error| complaint(file, 0, error))?;
        if !there {
            return Err(SignalError::Empty {
                file: file.to_owned(),
            });
        }
        let given: Vec<String> = record
            .iter()
            .map(|name| {
                name.trim_start_matches('\u{feff}')
                    .trim_matches('"')
                    .to_lowercase()
            })
            .collect();
        let swapped = if given == names {
            false
        } else if given.iter().rev().eq(names.iter()) {
            true
        } else {
            return Err(SignalError::Line {
                file: file.to_owned(),
                line: record.position().map_or(1, csv::Position::line),
                given: format!("\"{}\"", short(&record)),
                allowed: format!("a header with two columns, {},{}{hint}", names[0], names[1]),
            });
        };
        let first = rows.position().clone();
        let mut columns = Self {
            file: file.to_owned(),
            names,
            swapped,
            rows,
            record,
            first,
            read: 0,
        };
        // A file of a header and nothing else is told now, not halfway through the work.
        columns.next()?;
        columns.rewind()?;
        Ok(columns)
    }

    pub(super) fn file(&self) -> &str {
        &self.file
    }

    /// Rows read so far.
    pub(super) fn count(&self) -> u64 {
        self.read
    }

    /// The line of the row read last.
    pub(super) fn line(&self) -> u64 {
        self.record.position().map_or(0, csv::Position::line)
    }

    /// The next row, in the order of the names; `None` at the end.
    pub(super) fn next(&mut self) -> Result<Option<[f64; 2]>, SignalError> {
        let there = self
            .rows
            .read_record(&mut self.record)
            .map_err(|error| complaint(&self.file, self.read, error))?;
        if !there {
            return if self.read == 0 {
                Err(SignalError::Empty {
                    file: self.file.clone(),
                })
            } else {
                Ok(None)
            };
        }
        let mut fields = self.record.iter();
        let pair = match (fields.next(), fields.next(), fields.next()) {
            (Some(first), Some(second), None) => number(first).zip(number(second)),
            _ => None,
        };
        let Some((first, second)) = pair else {
            return Err(SignalError::Line {
                file: self.file.clone(),
                line: self.line(),
                given: format!("\"{}\"", short(&self.record)),
                allowed: format!(
                    "two finite numbers with a decimal point, {},{}",
                    self.names[usize::from(self.swapped)],
                    self.names[usize::from(!self.swapped)]
                ),
            });
        };
        self.read += 1;
        Ok(Some(if self.swapped {
            [second, first]
        } else {
            [first, second]
        }))
    }

    pub(super) fn rewind(&mut self) -> Result<(), SignalError> {
        self.read = 0;
        self.rows
            .seek(self.first.clone())
            .map_err(|error| complaint(&self.file, 0, error))
    }
}

fn number(text: &str) -> Option<f64> {
    text.trim_matches('"')
        .parse::<f64>()
        .ok()
        .filter(|value| value.is_finite())
}

/// The row as text, cut to a bearable length.
fn short(record: &csv::StringRecord) -> String {
    let text = record.iter().collect::<Vec<_>>().join(",");
    if text.chars().count() > 60 {
        format!("{} ...", text.chars().take(60).collect::<String>())
    } else {
        text
    }
}

fn complaint(file: &str, samples: u64, error: csv::Error) -> SignalError {
    let line = error.position().map_or(0, csv::Position::line);
    match error.into_kind() {
        csv::ErrorKind::Io(cause) if cause.kind() == io::ErrorKind::InvalidData => {
            SignalError::Malformed {
                file: file.to_owned(),
                given: format!("{cause}, after {samples} samples"),
                allowed: "a text file of short lines".to_owned(),
            }
        }
        csv::ErrorKind::Io(cause) => SignalError::Io {
            file: file.to_owned(),
            samples,
            cause,
        },
        csv::ErrorKind::Utf8 { .. } => SignalError::Line {
            file: file.to_owned(),
            line,
            given: "bytes that are no text".to_owned(),
            allowed: "a text file in UTF-8".to_owned(),
        },
        other => SignalError::Line {
            file: file.to_owned(),
            line,
            given: format!("{other:?}"),
            allowed: "two numbers".to_owned(),
        },
    }
}

/// A reader that refuses endless lines, so that no row can outgrow memory.
struct ShortLines {
    reader: BufReader<Box<dyn ReadSeek>>,
    line: usize,
}

impl Read for ShortLines {
    fn read(&mut self, out: &mut [u8]) -> io::Result<usize> {
        let count = self.reader.read(out)?;
        for byte in &out[..count] {
            self.line = if matches!(byte, b'\n' | b'\r') {
                0
            } else {
                self.line + 1
            };
            if self.line > MOST_LINE_BYTES {
                return Err(io::Error::new(
                    io::ErrorKind::InvalidData,
                    format!("a line of more than {MOST_LINE_BYTES} bytes"),
                ));
            }
        }
        Ok(count)
    }
}

impl Seek for ShortLines {
    fn seek(&mut self, to: SeekFrom) -> io::Result<u64> {
        self.line = 0;
        self.reader.seek(to)
    }
}

/// I/Q samples from a text file.
pub(super) struct TextSamples {
    columns: Columns,
    rate_hz: f64,
    gain: f64,
}

impl TextSamples {
    pub(super) fn new(columns: Columns, rate_hz: f64, full_scale: f64) -> Self {
        Self {
            columns,
            rate_hz,
            gain: 1.0 / full_scale,
        }
    }
}

impl Source for TextSamples {
    fn rate_hz(&self) -> f64 {
        self.rate_hz
    }

    fn len(&self) -> Option<u64> {
        None
    }

    fn read(&mut self, block: &mut [Complex64]) -> Result<usize, SignalError> {
        let mut count = 0;
        while count < block.len() {
            let Some([i, q]) = self.columns.next()? else {
                break;
            };
            block[count] = Complex64::new(i * self.gain, q * self.gain);
            count += 1;
        }
        Ok(count)
    }

    fn rewind(&mut self) -> Result<(), SignalError> {
        self.columns.rewind()
    }
}
