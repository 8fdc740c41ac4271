//! NumPy array files: header version 1 to 3, one-dimensional complex64 or complex128.

use std::io::{Read, SeekFrom};

use npyz::{DType, Endianness, NpyHeader, TypeChar};

use super::SignalError;
use super::blocks::{Encoding, Layout};
use super::format::FormatOptions;
use crate::input::ReadSeek;

/// A header of a one-dimensional array has about 120 bytes.
const MOST_HEADER_BYTES: usize = 4096;

/// Reads the header and checks it against the file's size.
pub(super) fn layout(
    reader: &mut Box<dyn ReadSeek>,
    file: &str,
    options: &FormatOptions,
) -> Result<Layout, SignalError> {
    let io = |cause| SignalError::Io {
        file: file.to_owned(),
        samples: 0,
        cause,
    };
    let malformed = |given: String, allowed: &str| SignalError::Malformed {
        file: file.to_owned(),
        given,
        allowed: allowed.to_owned(),
    };
    let end = reader.seek(SeekFrom::End(0)).map_err(io)?;
    reader.seek(SeekFrom::Start(0)).map_err(io)?;
    if end == 0 {
        return Err(SignalError::Empty {
            file: file.to_owned(),
        });
    }
    let mut head = Vec::new();
    reader
        .as_mut()
        .take(MOST_HEADER_BYTES as u64)
        .read_to_end(&mut head)
        .map_err(io)?;
    if !head.starts_with(b"\x93NUMPY") {
        return Err(malformed(
            "a file that does not start as a NumPy array file does".to_owned(),
            "a .npy file as numpy.save writes it; state `format` if it is another format",
        ));
    }
    let cut = || {
        malformed(
            "a header that is cut off or too long".to_owned(),
            "a .npy file of one complex array, whose header has about 128 bytes",
        )
    };
    let start = match (head.get(6), head.get(8..12)) {
        (Some(1), Some(size)) => 10 + usize::from(u16::from_le_bytes([size[0], size[1]])),
        (Some(_), Some(size)) => 12usize
            .saturating_add(u32::from_le_bytes([size[0], size[1], size[2], size[3]]) as usize),
        _ => return Err(cut()),
    };
    let text = head.get(10..start).ok_or_else(cut)?;
    let one_complex =
        "one complex array of one dimension: numpy.save(name, x.astype(numpy.complex64))";
    if !is_simple(text) {
        return Err(malformed(
            "a header of nested types or of sizes past any file".to_owned(),
            one_complex,
        ));
    }
    let header = NpyHeader::from_reader(&head[..start])
        .map_err(|error| malformed(format!("a broken header ({error})"), one_complex))?;

    let dtype = header.dtype();
    let encoding = match &dtype {
        DType::Plain(kind) if kind.type_char() == TypeChar::Complex => {
            match (kind.size_field(), kind.endianness()) {
                (8, Endianness::Big) => Some(Encoding::F32Big),
                (8, _) => Some(Encoding::F32),
                (16, Endianness::Big) => Some(Encoding::F64Big),
                (16, _) => Some(Encoding::F64),
                _ => None,
            }
        }
        _ => None,
    };
    let Some(encoding) = encoding else {
        return Err(malformed(
            format!("elements of type {}", dtype.descr()),
            "complex64 or complex128: x = i + 1j * q, then numpy.save(name, x.astype(numpy.complex64))",
        ));
    };
    let [samples] = *header.shape() else {
        return Err(malformed(
            format!("an array of shape {:?}", header.shape()),
            "one dimension; save one row or column: numpy.save(name, x[0])",
        ));
    };
    let there = end - start as u64;
    let stated = samples.checked_mul(2 * encoding.bytes() as u64);
    if stated != Some(there) {
        return Err(SignalError::ImpossibleLength {
            file: file.to_owned(),
            given: format!("the header states {samples} samples, and {there} bytes follow it"),
            allowed: format!(
                "{} bytes a sample: the file is cut off, or its header is wrong",
                2 * encoding.bytes()
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
        start: start as u64,
        samples,
        full_scale: options.full_scale.unwrap_or(1.0),
    })
}

/// True where the header's brackets and sizes are such that parsing it neither recurses deeply nor
/// overflows: a product of numbers of at most 18 digits together stays below 10^18.
fn is_simple(text: &[u8]) -> bool {
    let (mut depth, mut deepest) = (0i32, 0i32);
    for byte in text {
        match byte {
            b'(' | b'[' | b'{' => depth += 1,
            b')' | b']' | b'}' => depth -= 1,
            _ => {}
        }
        deepest = deepest.max(depth);
    }
    let digits = text.iter().filter(|byte| byte.is_ascii_digit()).count();
    let hexadecimal = text.windows(2).any(|pair| matches!(pair, b"0x" | b"0X"));
    deepest <= 4 && digits <= 18 && !hexadecimal
}
