//! Signals to files: the formats that the readers read.

use std::io::{self, BufWriter, Seek, SeekFrom, Write};

use npyz::WriterBuilder;
use num_complex::Complex64;
use serde::Serialize;

use super::{Format, SignalError, Source};

/// How to write a signal.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Writing {
    /// WAV, 16-bit integers.
    WavInt16,
    /// WAV, 24-bit integers.
    WavInt24,
    /// WAV, 32-bit floats.
    WavFloat,
    /// Text with the header `i,q`, every digit that a 64-bit float has.
    Csv,
    /// Raw 32-bit floats.
    Cf32,
    /// Raw 16-bit integers, 32768 for 1.0.
    Ci16,
    /// NumPy complex64.
    NpyComplex64,
    /// NumPy complex128.
    NpyComplex128,
    /// The samples of a SigMF recording, 32-bit floats.
    SigmfCf32,
    /// The samples of a SigMF recording, 16-bit integers, 32768 for 1.0.
    SigmfCi16,
}

impl Writing {
    /// The file format.
    pub fn format(self) -> Format {
        match self {
            Self::WavInt16 | Self::WavInt24 | Self::WavFloat => Format::Wav,
            Self::Csv => Format::Csv,
            Self::Cf32 => Format::Cf32,
            Self::Ci16 => Format::Ci16,
            Self::NpyComplex64 | Self::NpyComplex128 => Format::Npy,
            Self::SigmfCf32 | Self::SigmfCi16 => Format::Sigmf,
        }
    }

    /// The text of the file `name.toml` that must stand beside the file for it to be read without
    /// options; `None` where the file itself holds its rate.
    /// A SigMF recording has its metadata, [`super::sigmf_meta`], in place of it.
    pub fn sidecar(self, rate_hz: f64) -> Option<String> {
        match self {
            Self::SigmfCf32 => return Some(super::sigmf_meta("cf32_le", rate_hz, "test signal")),
            Self::SigmfCi16 => return Some(super::sigmf_meta("ci16_le", rate_hz, "test signal")),
            _ => {}
        }
        (self.format() != Format::Wav).then(|| format!("rate = {rate_hz:?}  # Hz\n"))
    }
}

/// Writes what `source` still holds to `sink`, block by block; returns the number of samples. `file`
/// names the sink in complaints.
///
/// Integers are rounded to the nearest code. A part of exactly +1.0, which has no code, becomes the
/// highest code.
///
/// # Errors
/// An I/O failure, a part beyond +/-1.0 for integers, a rate or length that WAV cannot hold.
pub fn write<W: Write + Seek>(
    source: &mut dyn Source,
    writing: Writing,
    sink: W,
    file: &str,
) -> Result<u64, SignalError> {
    let mut sink = BufWriter::with_capacity(1 << 16, sink);
    match writing {
        Writing::WavInt16 => wav(source, sink, file, 16, hound::SampleFormat::Int),
        Writing::WavInt24 => wav(source, sink, file, 24, hound::SampleFormat::Int),
        Writing::WavFloat => wav(source, sink, file, 32, hound::SampleFormat::Float),
        Writing::Csv => {
            let begun = sink.write_all(b"i,q\n");
            stream(source, file, begun, &mut sink, |sink, x| {
                writeln!(sink, "{:?},{:?}", x.re, x.im)
            })
        }
        Writing::Cf32 | Writing::SigmfCf32 => stream(source, file, Ok(()), &mut sink, put_f32),
        Writing::Ci16 | Writing::SigmfCi16 => stream(source, file, Ok(()), &mut sink, |sink, x| {
            sink.write_all(&(code(x.re, 16)? as i16).to_le_bytes())?;
            sink.write_all(&(code(x.im, 16)? as i16).to_le_bytes())
        }),
        Writing::NpyComplex64 => npy(source, &mut sink, file, "<c8", put_f32),
        Writing::NpyComplex128 => npy(source, &mut sink, file, "<c16", |sink, x| {
            sink.write_all(&x.re.to_le_bytes())?;
            sink.write_all(&x.im.to_le_bytes())
        }),
    }
}

fn put_f32<W: Write>(sink: &mut W, x: Complex64) -> io::Result<()> {
    sink.write_all(&single(x.re)?.to_le_bytes())?;
    sink.write_all(&single(x.im)?.to_le_bytes())
}

/// `value` as a 32-bit float, where it has a finite one.
fn single(value: f64) -> io::Result<f32> {
    let single = value as f32;
    if single.is_finite() {
        Ok(single)
    } else {
        Err(io::Error::new(
            io::ErrorKind::InvalidInput,
            format!("{value} is beyond the range of 32-bit floats"),
        ))
    }
}

/// Puts every sample of `source` into `sink`.
fn stream<W: Write>(
    source: &mut dyn Source,
    file: &str,
    begun: io::Result<()>,
    sink: &mut W,
    mut put: impl FnMut(&mut W, Complex64) -> io::Result<()>,
) -> Result<u64, SignalError> {
    let mut samples = 0;
    begun.map_err(|cause| refuse(file, samples, cause))?;
    let mut block = vec![Complex64::ZERO; 1 << 13];
    loop {
        let count = source.read(&mut block)?;
        if count == 0 {
            break;
        }
        for x in &block[..count] {
            put(sink, *x).map_err(|cause| refuse(file, samples, cause))?;
            samples += 1;
        }
    }
    sink.flush().map_err(|cause| refuse(file, samples, cause))?;
    Ok(samples)
}

fn refuse(file: &str, samples: u64, cause: io::Error) -> SignalError {
    if cause.kind() == io::ErrorKind::InvalidInput {
        return SignalError::Unwritable {
            given: format!("sample {samples}: {cause}"),
            allowed: "-1.0 to 1.0 for integers, +/-3.4e38 for 32-bit floats: lower the peak, or write wider numbers".to_owned(),
        };
    }
    SignalError::Io {
        file: file.to_owned(),
        samples,
        cause,
    }
}

/// The integer code of `value`, of `bits` bits with 1.0 one above the highest.
fn code(value: f64, bits: u32) -> io::Result<i32> {
    let full_scale = f64::from(1u32 << (bits - 1));
    if !(-1.0..=1.0).contains(&value) {
        return Err(io::Error::new(
            io::ErrorKind::InvalidInput,
            format!("{value} is beyond full scale"),
        ));
    }
    Ok((value * full_scale).round().min(full_scale - 1.0) as i32)
}

fn wav<W: Write + Seek>(
    source: &mut dyn Source,
    sink: W,
    file: &str,
    bits: u16,
    format: hound::SampleFormat,
) -> Result<u64, SignalError> {
    let rate_hz = source.rate_hz();
    let frame = u64::from(bits / 8 * 2);
    // The header holds bytes a second too, in 32 bits.
    let most_hz = u64::from(u32::MAX) / frame;
    if rate_hz.fract() != 0.0 || !(1.0..=most_hz as f64).contains(&rate_hz) {
        return Err(SignalError::Unwritable {
            given: format!("a rate of {rate_hz} Hz"),
            allowed: format!(
                "whole numbers of Hz up to {most_hz} in WAV of this width; write .npy, .cf32 or .csv"
            ),
        });
    }
    let failed = |samples: u64, error: hound::Error| match error {
        hound::Error::IoError(cause) => refuse(file, samples, cause),
        other => refuse(file, samples, io::Error::other(other.to_string())),
    };
    // The header takes less than 100 bytes of what 32-bit sizes can say.
    let most = (u64::from(u32::MAX) - 100) / frame;
    let spec = hound::WavSpec {
        channels: 2,
        sample_rate: rate_hz as u32,
        bits_per_sample: bits,
        sample_format: format,
    };
    let mut writer = hound::WavWriter::new(sink, spec).map_err(|error| failed(0, error))?;
    let mut samples = 0;
    let mut block = vec![Complex64::ZERO; 1 << 13];
    loop {
        let count = source.read(&mut block)?;
        if count == 0 {
            break;
        }
        if samples + count as u64 > most {
            return Err(SignalError::Unwritable {
                given: format!("more than {most} samples"),
                allowed: "at most 4 GiB in WAV; write .npy or .cf32".to_owned(),
            });
        }
        for x in &block[..count] {
            for part in [x.re, x.im] {
                match format {
                    hound::SampleFormat::Float => writer
                        .write_sample(single(part).map_err(|cause| refuse(file, samples, cause))?),
                    hound::SampleFormat::Int => writer.write_sample(
                        code(part, u32::from(bits))
                            .map_err(|cause| refuse(file, samples, cause))?,
                    ),
                }
                .map_err(|error| failed(samples, error))?;
            }
            samples += 1;
        }
    }
    writer.finalize().map_err(|error| failed(samples, error))?;
    Ok(samples)
}

/// The header is written twice: its length does not depend on the number of samples.
fn npy<W: Write + Seek>(
    source: &mut dyn Source,
    sink: &mut W,
    file: &str,
    kind: &str,
    put: impl FnMut(&mut W, Complex64) -> io::Result<()>,
) -> Result<u64, SignalError> {
    let header = |samples: u64| -> io::Result<Vec<u8>> {
        let kind = kind
            .parse()
            .map_err(|_| io::Error::other("an unknown element type"))?;
        let mut bytes = Vec::new();
        npyz::WriteOptions::new_header_only()
            .dtype(npyz::DType::Plain(kind))
            .shape(&[samples])
            .writer(&mut bytes)
            .write_header_only()?;
        Ok(bytes)
    };
    let placeholder = header(0).map_err(|cause| refuse(file, 0, cause))?;
    let begun = sink.write_all(&placeholder);
    let samples = stream(source, file, begun, sink, put)?;
    let finish = |sink: &mut W| {
        let last = header(samples)?;
        if last.len() != placeholder.len() {
            return Err(io::Error::other("the header's length changed"));
        }
        sink.seek(SeekFrom::Start(0))?;
        sink.write_all(&last)?;
        sink.flush()
    };
    finish(sink).map_err(|cause| refuse(file, samples, cause))?;
    Ok(samples)
}
