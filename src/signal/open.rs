//! From a file's name to a stream of samples or edges.

use std::io::{ErrorKind, Read, Seek, SeekFrom};

use super::blocks::{Blocks, Encoding, Layout};
use super::format::{Format, FormatOptions};
use super::pulse::{Edge, MOST_EDGES, PcmEdges, PulseList, PulseSource, TextEdges};
use super::text::{Columns, TextSamples};
use super::wav::Channels;
use super::{SignalError, Source, npy, sigmf, vcd, wav};
use crate::input::{Document, Files, ReadSeek};

/// Opens the I/Q signal `name`. Its header is read and checked now, its samples as they are asked for.
///
/// A sidecar `name.toml` with the keys `format`, `rate` and `full_scale` completes `options`.
///
/// # Errors
/// A file that cannot be opened, a format or rate that is not known or stated twice differently, a
/// header that is wrong or cannot be true of a file of this size.
pub fn open(
    files: &dyn Files,
    name: &str,
    options: &FormatOptions,
) -> Result<Box<dyn Source>, SignalError> {
    let file = files.display(name);
    let (mut reader, format, options) = prepare(files, name, &file, options)?;
    let layout = match format {
        Format::Wav => wav::layout(&mut reader, &file, &options, Channels::Stereo)?,
        Format::Npy => npy::layout(&mut reader, &file, &options)?,
        Format::Cf32 => raw_layout(&mut reader, &file, &options, Encoding::F32)?,
        Format::Ci16 => raw_layout(&mut reader, &file, &options, Encoding::I16)?,
        Format::Sigmf => {
            let (reader, layout) = sigmf::open(files, name, &options)?;
            return Ok(Box::new(Blocks::new(reader, layout)?));
        }
        Format::Csv => {
            let hint = "; a file with time,level is a pulse sequence, which only a scheme that takes pulses can use";
            let columns = Columns::new(reader, &file, ["i", "q"], hint)?;
            let rate_hz = options.rate_hz.ok_or(SignalError::MissingRate { file })?;
            return Ok(Box::new(TextSamples::new(
                columns,
                rate_hz,
                options.full_scale.unwrap_or(1.0),
            )));
        }
    };
    Ok(Box::new(Blocks::new(reader, layout)?))
}

/// Opens the pulse sequence `name`: mono WAV, or CSV with the columns `time,level` (s, full scale 1.0).
///
/// # Errors
/// As [`open`].
pub fn open_pulses(
    files: &dyn Files,
    name: &str,
    options: &FormatOptions,
) -> Result<Box<dyn PulseSource>, SignalError> {
    let file = files.display(name);
    let (mut reader, format, options) = prepare(files, name, &file, options)?;
    match format {
        Format::Wav => {
            let layout = wav::layout(&mut reader, &file, &options, Channels::Mono)?;
            Ok(Box::new(PcmEdges::new(Blocks::new(reader, layout)?)))
        }
        Format::Csv => {
            let hint = " (time in seconds); a file with i,q is a signal, not a pulse sequence";
            let columns = Columns::new(reader, &file, ["time", "level"], hint)?;
            Ok(Box::new(TextEdges::new(
                columns,
                options.full_scale.unwrap_or(1.0),
            )))
        }
        other => Err(SignalError::Malformed {
            file,
            given: format!("a pulse sequence as .{}", other.name()),
            allowed: "a mono WAV file or a CSV file with time,level".to_owned(),
        }),
    }
}

/// How a pulse sequence is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum PulseFormat {
    /// Mono WAV: the level at every sample.
    Wav,
    /// Text with the columns `time,level`.
    Csv,
    /// A value change dump (IEEE 1364).
    Vcd,
}

/// What is stated about a pulse sequence outside of its file.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct PulseOptions {
    /// The format; by the file's extension where absent.
    pub format: Option<PulseFormat>,
    /// The signal of a value change dump: its path, or the end of it.
    pub signal: Option<String>,
    /// The number in the file that stands for 1.0.
    pub full_scale: Option<f64>,
    /// Levels from here on count as 1, all others as 0.
    pub threshold: Option<f64>,
}

/// Reads the whole pulse sequence `name` and checks it: increasing times, levels from 0 to 1.
///
/// # Errors
/// As [`open`]; a level out of range, more than [`MOST_EDGES`] edges.
pub fn read_edges(
    files: &dyn Files,
    name: &str,
    options: &PulseOptions,
) -> Result<PulseList, SignalError> {
    let file = files.display(name);
    let named_vcd = name.to_lowercase().ends_with(".vcd");
    let format = match options.format {
        None if named_vcd => Some(PulseFormat::Vcd),
        format => format,
    };
    let mut list = if format == Some(PulseFormat::Vcd) {
        let reader = files.open(name).map_err(|cause| SignalError::Open {
            file: file.clone(),
            cause,
        })?;
        vcd::read(reader, &file, options.signal.as_deref(), options.full_scale)?
    } else {
        if let Some(signal) = &options.signal {
            return Err(SignalError::Malformed {
                file,
                given: format!("signal \"{signal}\" of a file with one sequence"),
                allowed: "a signal's name beside a .vcd file only".to_owned(),
            });
        }
        let options = FormatOptions {
            format: format.map(|format| match format {
                PulseFormat::Wav => Format::Wav,
                _ => Format::Csv,
            }),
            rate_hz: None,
            full_scale: options.full_scale,
        };
        all_edges(&mut *open_pulses(files, name, &options)?, &file)?
    };
    if let Some(threshold) = options.threshold {
        for edge in &mut list.edges {
            edge.level = f64::from(u8::from(edge.level >= threshold));
        }
        list.edges
            .dedup_by(|later, earlier| later.level == earlier.level);
    }
    let outside = |edge: &Edge| !(0.0..=1.0).contains(&edge.level);
    if let Some(at) = list.edges.iter().position(outside) {
        let Edge { time_s, level } = list.edges[at];
        return Err(SignalError::Malformed {
            file,
            given: format!("a level of {level} at {time_s} s (edge {at}, counted from 0)"),
            allowed: "levels from 0 (off) to 1 (full); state full_scale or threshold".to_owned(),
        });
    }
    Ok(list)
}

fn all_edges(source: &mut dyn PulseSource, file: &str) -> Result<PulseList, SignalError> {
    let mut edges = Vec::new();
    let mut block = [Edge {
        time_s: 0.0,
        level: 0.0,
    }; 1024];
    loop {
        let count = source.read(&mut block)?;
        if count == 0 {
            break;
        }
        if edges.len() + count > MOST_EDGES {
            return Err(SignalError::Malformed {
                file: file.to_owned(),
                given: format!("more than {MOST_EDGES} edges"),
                allowed: "a shorter sequence, or a coarser one".to_owned(),
            });
        }
        edges.extend_from_slice(&block[..count]);
    }
    Ok(PulseList {
        edges,
        end_s: source.end_s(),
    })
}

/// Rates beyond these are slips of a prefix.
pub(super) const RATES_HZ: (f64, f64) = (1e-6, 1e15);

/// Full scales beyond these would overflow or vanish.
const FULL_SCALES: (f64, f64) = (1e-15, 1e15);

type Prepared = (Box<dyn ReadSeek>, Format, FormatOptions);

/// Opens the file, completes the options by its sidecar, and decides the format.
fn prepare(
    files: &dyn Files,
    name: &str,
    file: &str,
    options: &FormatOptions,
) -> Result<Prepared, SignalError> {
    let reader = files.open(name).map_err(|cause| SignalError::Open {
        file: file.to_owned(),
        cause,
    })?;
    let sidecar = format!("{name}.toml");
    let options = match files.text(&sidecar) {
        Ok(text) => {
            let document = Document::parse(&files.display(&sidecar), &text)?;
            let section = document.root();
            let stated = FormatOptions::from_section(&section)?;
            section.finish()?;
            options.merged(stated, file)?
        }
        Err(cause) if cause.kind() == ErrorKind::NotFound => *options,
        Err(cause) => {
            return Err(SignalError::Open {
                file: files.display(&sidecar),
                cause,
            });
        }
    };
    for (what, value, (low, high)) in [
        ("sample rate in Hz", options.rate_hz, RATES_HZ),
        ("full scale", options.full_scale, FULL_SCALES),
    ] {
        if let Some(value) = value
            && !(low..=high).contains(&value)
        {
            return Err(SignalError::Malformed {
                file: file.to_owned(),
                given: format!("a {what} of {value}"),
                allowed: format!("{low:e} to {high:e}"),
            });
        }
    }
    let format = match options.format {
        Some(format) => format,
        None => Format::of_name(name)?,
    };
    Ok((reader, format, options))
}

/// A file that is nothing but samples.
fn raw_layout(
    reader: &mut Box<dyn ReadSeek>,
    file: &str,
    options: &FormatOptions,
    encoding: Encoding,
) -> Result<Layout, SignalError> {
    let io = |cause| SignalError::Io {
        file: file.to_owned(),
        samples: 0,
        cause,
    };
    let mut first = Vec::new();
    reader
        .as_mut()
        .take(6)
        .read_to_end(&mut first)
        .map_err(io)?;
    let header = if first.starts_with(b"\x93NUMPY") {
        Some("npy")
    } else if first.starts_with(b"RIFF") || first.starts_with(b"RF64") {
        Some("wav")
    } else {
        None
    };
    if let Some(real) = header {
        return Err(SignalError::Malformed {
            file: file.to_owned(),
            given: format!("a file that starts as a .{real} file does"),
            allowed: format!(
                "raw samples without a header; give it the extension .{real} or state format = \"{real}\""
            ),
        });
    }
    let bytes = reader.seek(SeekFrom::End(0)).map_err(io)?;
    let frame = 2 * encoding.bytes() as u64;
    if !bytes.is_multiple_of(frame) {
        return Err(SignalError::ImpossibleLength {
            file: file.to_owned(),
            given: format!("{bytes} bytes"),
            allowed: format!(
                "a multiple of {frame}, the bytes of one sample: the file is cut off or of another format"
            ),
        });
    }
    Ok(Layout {
        file: file.to_owned(),
        rate_hz: options.rate_hz.ok_or_else(|| SignalError::MissingRate {
            file: file.to_owned(),
        })?,
        encoding,
        channels: 2,
        start: 0,
        samples: bytes / frame,
        full_scale: options.full_scale.unwrap_or_else(|| encoding.full_scale()),
    })
}
