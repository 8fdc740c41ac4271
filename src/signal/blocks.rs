//! Binary samples of one fixed width, read in large blocks and decoded in bulk.

use std::io::{ErrorKind, SeekFrom};

use num_complex::Complex64;

use super::{SignalError, Source};
use crate::input::ReadSeek;

/// Bytes read at a time: large enough to hide the call, small enough for a cache.
const BLOCK_BYTES: usize = 1 << 18;

/// How one number is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Encoding {
    I16,
    I24,
    I32,
    F32,
    F64,
    F32Big,
    F64Big,
    I8,
    I16Big,
    I32Big,
}

impl Encoding {
    /// Bytes of one number.
    pub(super) fn bytes(self) -> usize {
        match self {
            Self::I8 => 1,
            Self::I16 | Self::I16Big => 2,
            Self::I24 => 3,
            Self::I32 | Self::I32Big | Self::F32 | Self::F32Big => 4,
            Self::F64 | Self::F64Big => 8,
        }
    }

    /// The code that is full scale: integers are scaled so that the most negative code is -1.0.
    pub(super) fn full_scale(self) -> f64 {
        match self {
            Self::I8 => 128.0,
            Self::I16 | Self::I16Big => 32_768.0,
            Self::I24 => 8_388_608.0,
            Self::I32 | Self::I32Big => 2_147_483_648.0,
            Self::F32 | Self::F64 | Self::F32Big | Self::F64Big => 1.0,
        }
    }
}

/// Where the numbers stand in a file.
#[derive(Debug, Clone)]
pub(super) struct Layout {
    pub(super) file: String,
    pub(super) rate_hz: f64,
    pub(super) encoding: Encoding,
    /// Numbers of one sample: 2 for I/Q, 1 for levels.
    pub(super) channels: usize,
    /// Position of the first byte.
    pub(super) start: u64,
    /// Number of samples, checked against the file's size.
    pub(super) samples: u64,
    /// The number that stands for 1.0.
    pub(super) full_scale: f64,
}

/// Samples of a [`Layout`], read front to back.
pub(super) struct Blocks {
    reader: Box<dyn ReadSeek>,
    layout: Layout,
    next: u64,
    bytes: Vec<u8>,
}

impl Blocks {
    /// Takes the reader wherever it stands.
    pub(super) fn new(reader: Box<dyn ReadSeek>, layout: Layout) -> Result<Self, SignalError> {
        if layout.samples == 0 {
            return Err(SignalError::Empty { file: layout.file });
        }
        let mut blocks = Self {
            reader,
            layout,
            next: 0,
            bytes: Vec::new(),
        };
        blocks.rewind()?;
        Ok(blocks)
    }

    pub(super) fn layout(&self) -> &Layout {
        &self.layout
    }

    /// Index of the sample that comes next.
    pub(super) fn position(&self) -> u64 {
        self.next
    }

    pub(super) fn rewind(&mut self) -> Result<(), SignalError> {
        self.next = 0;
        self.reader
            .seek(SeekFrom::Start(self.layout.start))
            .map_err(|cause| SignalError::Io {
                file: self.layout.file.clone(),
                samples: 0,
                cause,
            })?;
        Ok(())
    }

    /// Reads up to `most` samples as bytes; returns how many.
    fn fetch(&mut self, most: usize) -> Result<usize, SignalError> {
        let frame = self.layout.encoding.bytes() * self.layout.channels;
        let left = self.layout.samples - self.next;
        let count = (most.min(BLOCK_BYTES / frame) as u64).min(left) as usize;
        self.bytes.resize(count * frame, 0);
        match self.reader.read_exact(&mut self.bytes) {
            Ok(()) => Ok(count),
            Err(cause) if cause.kind() == ErrorKind::UnexpectedEof => {
                Err(SignalError::ImpossibleLength {
                    file: self.layout.file.clone(),
                    given: format!(
                        "the file ends within {count} samples from sample {}",
                        self.next
                    ),
                    allowed: format!("it should hold {} samples", self.layout.samples),
                })
            }
            Err(cause) => Err(SignalError::Io {
                file: self.layout.file.clone(),
                samples: self.next,
                cause,
            }),
        }
    }

    /// Complex samples; the layout has two channels.
    fn read_pairs(&mut self, block: &mut [Complex64]) -> Result<usize, SignalError> {
        let count = self.fetch(block.len())?;
        let out = &mut block[..count];
        let gain = 1.0 / self.layout.full_scale;
        match self.layout.encoding {
            Encoding::I16 => pairs(&self.bytes, out, gain, i16_le),
            Encoding::I24 => pairs(&self.bytes, out, gain, i24_le),
            Encoding::I32 => pairs(&self.bytes, out, gain, i32_le),
            Encoding::F32 => pairs(&self.bytes, out, gain, f32_le),
            Encoding::F64 => pairs(&self.bytes, out, gain, f64::from_le_bytes),
            Encoding::F32Big => pairs(&self.bytes, out, gain, f32_be),
            Encoding::F64Big => pairs(&self.bytes, out, gain, f64::from_be_bytes),
            Encoding::I8 => pairs(&self.bytes, out, gain, i8_only),
            Encoding::I16Big => pairs(&self.bytes, out, gain, i16_be),
            Encoding::I32Big => pairs(&self.bytes, out, gain, i32_be),
        }
        let finite = |x: &Complex64| x.re.is_finite() & x.im.is_finite();
        if !out.iter().fold(true, |all, x| all & finite(x)) {
            let at = out.iter().position(|x| !finite(x)).unwrap_or(0);
            return Err(self.not_finite(at, out[at].to_string()));
        }
        self.next += count as u64;
        Ok(count)
    }

    /// Levels; the layout has one channel.
    pub(super) fn read_levels(&mut self, block: &mut [f64]) -> Result<usize, SignalError> {
        let count = self.fetch(block.len())?;
        let out = &mut block[..count];
        let gain = 1.0 / self.layout.full_scale;
        match self.layout.encoding {
            Encoding::I16 => levels(&self.bytes, out, gain, i16_le),
            Encoding::I24 => levels(&self.bytes, out, gain, i24_le),
            Encoding::I32 => levels(&self.bytes, out, gain, i32_le),
            Encoding::F32 => levels(&self.bytes, out, gain, f32_le),
            Encoding::F64 => levels(&self.bytes, out, gain, f64::from_le_bytes),
            Encoding::F32Big => levels(&self.bytes, out, gain, f32_be),
            Encoding::F64Big => levels(&self.bytes, out, gain, f64::from_be_bytes),
            Encoding::I8 => levels(&self.bytes, out, gain, i8_only),
            Encoding::I16Big => levels(&self.bytes, out, gain, i16_be),
            Encoding::I32Big => levels(&self.bytes, out, gain, i32_be),
        }
        if let Some(at) = out.iter().position(|x| !x.is_finite()) {
            return Err(self.not_finite(at, out[at].to_string()));
        }
        self.next += count as u64;
        Ok(count)
    }

    fn not_finite(&self, at: usize, given: String) -> SignalError {
        SignalError::NotFinite {
            file: self.layout.file.clone(),
            sample: self.next + at as u64,
            given,
        }
    }
}

impl Source for Blocks {
    fn rate_hz(&self) -> f64 {
        self.layout.rate_hz
    }

    fn len(&self) -> Option<u64> {
        Some(self.layout.samples)
    }

    fn read(&mut self, block: &mut [Complex64]) -> Result<usize, SignalError> {
        self.read_pairs(block)
    }

    fn rewind(&mut self) -> Result<(), SignalError> {
        Blocks::rewind(self)
    }
}

fn i8_only([byte]: [u8; 1]) -> f64 {
    f64::from(byte as i8)
}

fn i16_be(bytes: [u8; 2]) -> f64 {
    f64::from(i16::from_be_bytes(bytes))
}

fn i32_be(bytes: [u8; 4]) -> f64 {
    f64::from(i32::from_be_bytes(bytes))
}

fn i16_le(bytes: [u8; 2]) -> f64 {
    f64::from(i16::from_le_bytes(bytes))
}

fn i24_le([low, mid, high]: [u8; 3]) -> f64 {
    f64::from(i32::from_le_bytes([0, low, mid, high]) >> 8)
}

fn i32_le(bytes: [u8; 4]) -> f64 {
    f64::from(i32::from_le_bytes(bytes))
}

fn f32_le(bytes: [u8; 4]) -> f64 {
    f64::from(f32::from_le_bytes(bytes))
}

fn f32_be(bytes: [u8; 4]) -> f64 {
    f64::from(f32::from_be_bytes(bytes))
}

#[inline]
fn pairs<const N: usize>(
    bytes: &[u8],
    out: &mut [Complex64],
    gain: f64,
    number: impl Fn([u8; N]) -> f64,
) {
    let (numbers, _) = bytes.as_chunks::<N>();
    for (x, pair) in out.iter_mut().zip(numbers.chunks_exact(2)) {
        *x = Complex64::new(number(pair[0]) * gain, number(pair[1]) * gain);
    }
}

#[inline]
fn levels<const N: usize>(
    bytes: &[u8],
    out: &mut [f64],
    gain: f64,
    number: impl Fn([u8; N]) -> f64,
) {
    let (numbers, _) = bytes.as_chunks::<N>();
    for (x, raw) in out.iter_mut().zip(numbers) {
        *x = number(*raw) * gain;
    }
}
