//! WAV headers: RIFF, and RF64 or BW64 for files past 4 GiB.
//!
//! Layout after the published RIFF WAVE description (`fmt `, `data`, chunks padded to even sizes)
//! and EBU Tech 3306 / ITU-R BS.2088 (`ds64` with 64-bit sizes); field positions recalled from
//! memory and checked against files written by two independent writers in the tests.

use std::io::{Read, Seek, SeekFrom};

use super::SignalError;
use super::blocks::{Encoding, Layout};
use super::format::{FormatOptions, agree};
use crate::input::ReadSeek;

/// No sound file has more; a file of empty chunks must not be walked for ever.
const MOST_CHUNKS: usize = 4096;

/// What the channels of a WAV file are wanted for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Channels {
    /// I left, Q right.
    Stereo,
    /// Levels of a pulse sequence.
    Mono,
}

struct Shape {
    encoding: Encoding,
    channels: u16,
    rate_hz: u32,
}

/// Reads the header and checks it against the file's size.
pub(super) fn layout(
    reader: &mut Box<dyn ReadSeek>,
    file: &str,
    options: &FormatOptions,
    wanted: Channels,
) -> Result<Layout, SignalError> {
    let io = |cause| SignalError::Io {
        file: file.to_owned(),
        samples: 0,
        cause,
    };
    let malformed = |given: &str, allowed: &str| SignalError::Malformed {
        file: file.to_owned(),
        given: given.to_owned(),
        allowed: allowed.to_owned(),
    };
    let end = reader.seek(SeekFrom::End(0)).map_err(io)?;
    reader.rewind().map_err(io)?;
    if end == 0 {
        return Err(SignalError::Empty {
            file: file.to_owned(),
        });
    }
    let mut top = [0; 12];
    if end < 12 {
        return Err(malformed(
            &format!("{end} bytes"),
            "a WAV file, whose header alone is longer",
        ));
    }
    reader.read_exact(&mut top).map_err(io)?;
    let wide = matches!(&top[..4], b"RF64" | b"BW64");
    if !(wide || &top[..4] == b"RIFF") || &top[8..] != b"WAVE" {
        return Err(malformed(
            "a file that does not start as a WAV file does",
            "RIFF (or RF64) and WAVE in the first 12 bytes; state `format` if it is another format",
        ));
    }

    let mut shape = None;
    let mut wide_bytes = None;
    let mut at = 12;
    for _ in 0..MOST_CHUNKS {
        if at + 8 > end {
            return Err(malformed(
                "a file that ends before its samples",
                "a WAV file with a `fmt ` and a `data` chunk; it is cut off or damaged",
            ));
        }
        reader.seek(SeekFrom::Start(at)).map_err(io)?;
        let mut head = [0; 8];
        reader.read_exact(&mut head).map_err(io)?;
        let size = u32_at(&head, 4);
        let start = at + 8;
        let inside = |need: u64| {
            if start + need > end || u64::from(size) < need {
                Err(malformed(
                    &format!("a header chunk of {size} bytes that is cut off"),
                    &format!("at least {need} bytes, all of them in the file"),
                ))
            } else {
                Ok(())
            }
        };
        match &head[..4] {
            b"ds64" if wide => {
                inside(16)?;
                let mut sizes = [0; 16];
                reader.read_exact(&mut sizes).map_err(io)?;
                wide_bytes = Some(u64_at(&sizes, 8));
            }
            b"fmt " => {
                inside(16)?;
                let mut fmt = Vec::new();
                reader
                    .as_mut()
                    .take(u64::from(size.min(40)))
                    .read_to_end(&mut fmt)
                    .map_err(io)?;
                shape = Some(read_shape(&fmt, file)?);
            }
            b"data" => {
                let Some(shape) = shape else {
                    return Err(malformed(
                        "samples before the chunk that says how they are written",
                        "a `fmt ` chunk before the `data` chunk",
                    ));
                };
                let bytes = match wide_bytes {
                    Some(bytes) if size == u32::MAX => bytes,
                    _ => u64::from(size),
                };
                return finish(file, options, wanted, &shape, start, bytes, end);
            }
            _ => {}
        }
        at = start + u64::from(size) + u64::from(size & 1);
    }
    Err(malformed(
        &format!("more than {MOST_CHUNKS} chunks before the samples"),
        "a WAV file",
    ))
}

fn finish(
    file: &str,
    options: &FormatOptions,
    wanted: Channels,
    shape: &Shape,
    start: u64,
    bytes: u64,
    end: u64,
) -> Result<Layout, SignalError> {
    let malformed = |given: String, allowed: &str| SignalError::Malformed {
        file: file.to_owned(),
        given,
        allowed: allowed.to_owned(),
    };
    let channels = match (wanted, shape.channels) {
        (Channels::Stereo, 2) => 2,
        (Channels::Mono, 1) => 1,
        (Channels::Stereo, 1) => {
            return Err(malformed(
                "one channel (mono)".to_owned(),
                "two channels, I left and Q right; a mono file is a pulse sequence, which only a scheme that takes pulses can use",
            ));
        }
        (Channels::Mono, 2) => {
            return Err(malformed(
                "two channels (stereo)".to_owned(),
                "one channel with the levels of a pulse sequence; a stereo file is an I/Q signal",
            ));
        }
        (Channels::Stereo, count) => {
            return Err(malformed(
                format!("{count} channels"),
                "two channels, I left and Q right",
            ));
        }
        (Channels::Mono, count) => {
            return Err(malformed(
                format!("{count} channels"),
                "one channel with the levels of a pulse sequence",
            ));
        }
    };
    let impossible = |given: String, allowed: &str| SignalError::ImpossibleLength {
        file: file.to_owned(),
        given,
        allowed: allowed.to_owned(),
    };
    let there = end - start;
    if bytes == u64::from(u32::MAX) || (bytes == 0 && there > 0) {
        return Err(impossible(
            format!("the header states {bytes} bytes of samples, and {there} bytes follow it"),
            "the program that wrote it did not finish the header: write it again, or strip the header and read it raw as cf32 or ci16",
        ));
    }
    if bytes > there {
        return Err(impossible(
            format!("the header states {bytes} bytes of samples, and {there} bytes follow it"),
            "the file is cut off, or its header is wrong",
        ));
    }
    if there - bytes > u64::from(u32::MAX) {
        return Err(impossible(
            format!("the header states {bytes} bytes of samples, and {there} bytes follow it"),
            "a WAV header cannot state more than 4 GiB: write RF64, .npy or .cf32 instead",
        ));
    }
    let frame = (shape.encoding.bytes() * channels) as u64;
    if !bytes.is_multiple_of(frame) {
        return Err(impossible(
            format!("{bytes} bytes of samples"),
            &format!("a multiple of {frame}, the bytes of one sample"),
        ));
    }
    let rate_hz = agree(
        file,
        "the sample rate in Hz",
        Some(f64::from(shape.rate_hz)),
        options.rate_hz,
    )?;
    Ok(Layout {
        file: file.to_owned(),
        rate_hz: rate_hz.unwrap_or(f64::from(shape.rate_hz)),
        encoding: shape.encoding,
        channels,
        start,
        samples: bytes / frame,
        full_scale: shape.encoding.full_scale() * options.full_scale.unwrap_or(1.0),
    })
}

fn read_shape(fmt: &[u8], file: &str) -> Result<Shape, SignalError> {
    let malformed = |given: String, allowed: &str| SignalError::Malformed {
        file: file.to_owned(),
        given,
        allowed: allowed.to_owned(),
    };
    if fmt.len() < 16 {
        return Err(malformed(
            "a `fmt ` chunk that is cut off".to_owned(),
            "at least 16 bytes",
        ));
    }
    let mut tag = u16_at(fmt, 0);
    if tag == 0xFFFE {
        // Extensible: the first two bytes of the sub-format are the tag, the rest is fixed.
        const REST: [u8; 14] = [0, 0, 0, 0, 0x10, 0, 0x80, 0, 0, 0xAA, 0, 0x38, 0x9B, 0x71];
        if fmt.len() < 40 || fmt[26..40] != REST {
            return Err(malformed(
                "an extensible WAV format of unknown kind".to_owned(),
                "PCM or IEEE float",
            ));
        }
        tag = u16_at(fmt, 24);
    }
    let channels = u16_at(fmt, 2);
    let rate_hz = u32_at(fmt, 4);
    let frame = u16_at(fmt, 12);
    let bits = u16_at(fmt, 14);
    let encoding = match (tag, bits) {
        (1, 16) => Encoding::I16,
        (1, 24) => Encoding::I24,
        (1, 32) => Encoding::I32,
        (3, 32) => Encoding::F32,
        (3, 64) => Encoding::F64,
        (1 | 3, _) => {
            return Err(malformed(
                format!(
                    "{bits}-bit {}",
                    if tag == 1 { "integers" } else { "floats" }
                ),
                "16, 24 or 32-bit integers, 32 or 64-bit floats; coarser samples would bury the spectrum's skirts in quantization noise",
            ));
        }
        _ => {
            return Err(malformed(
                format!("WAV format tag {tag} (compressed or unknown)"),
                "uncompressed PCM (1) or IEEE float (3)",
            ));
        }
    };
    if channels == 0 || rate_hz == 0 {
        return Err(malformed(
            format!("{channels} channels at {rate_hz} Hz"),
            "at least one channel and a rate above 0 Hz",
        ));
    }
    if u64::from(frame) != encoding.bytes() as u64 * u64::from(channels) {
        return Err(malformed(
            format!("{frame} bytes for {channels} channels of {bits} bits"),
            "as many bytes as the channels and bits need, without padding",
        ));
    }
    Ok(Shape {
        encoding,
        channels,
        rate_hz,
    })
}

fn u16_at(bytes: &[u8], at: usize) -> u16 {
    u16::from_le_bytes([bytes[at], bytes[at + 1]])
}

fn u32_at(bytes: &[u8], at: usize) -> u32 {
    u32::from(u16_at(bytes, at)) | u32::from(u16_at(bytes, at + 2)) << 16
}

fn u64_at(bytes: &[u8], at: usize) -> u64 {
    u64::from(u32_at(bytes, at)) | u64::from(u32_at(bytes, at + 4)) << 32
}
