//! SigMF recordings: a text of metadata (`.sigmf-meta`) beside the samples (`.sigmf-data`).
//!
//! After the Signal Metadata Format Specification 1.x (an open specification, <https://sigmf.org>): datatypes
//! `cf32`, `cf64`, `ci8`, `ci16`, `ci32`, little and big endian; one channel; the keys `core:dataset`,
//! `core:header_bytes` and `core:trailing_bytes` of recordings in files of other makers.

use std::io::SeekFrom;

use serde_json::{Value, json};

use super::SignalError;
use super::blocks::{Encoding, Layout};
use super::format::{FormatOptions, agree};
use crate::input::{Files, ReadSeek};

/// Extensions of metadata and samples.
pub(super) const META: &str = ".sigmf-meta";
pub(super) const DATA: &str = ".sigmf-data";

const DATATYPES: [(&str, Encoding); 10] = [
    ("cf32_le", Encoding::F32),
    ("cf32_be", Encoding::F32Big),
    ("cf64_le", Encoding::F64),
    ("cf64_be", Encoding::F64Big),
    ("ci32_le", Encoding::I32),
    ("ci32_be", Encoding::I32Big),
    ("ci16_le", Encoding::I16),
    ("ci16_be", Encoding::I16Big),
    ("ci8", Encoding::I8),
    ("ci8_le", Encoding::I8),
];

/// `name` without the extension of either file, in any case of letters.
pub(super) fn stem(name: &str) -> Option<&str> {
    [META, DATA].into_iter().find_map(|extension| {
        let at = name.len().checked_sub(extension.len())?;
        let end = name.get(at..)?;
        end.eq_ignore_ascii_case(extension).then(|| &name[..at])
    })
}

/// Opens the samples of the recording that `name`, one of its two files, belongs to.
pub(super) fn open(
    files: &dyn Files,
    name: &str,
    options: &FormatOptions,
) -> Result<(Box<dyn ReadSeek>, Layout), SignalError> {
    let stem = stem(name).ok_or_else(|| SignalError::Malformed {
        file: files.display(name),
        given: "a recording whose name does not end as its files do".to_owned(),
        allowed: format!("NAME{META} or NAME{DATA}"),
    })?;
    let meta = format!("{stem}{META}");
    let file = files.display(&meta);
    let text = files.text(&meta).map_err(|cause| SignalError::Open {
        file: file.clone(),
        cause,
    })?;
    let facts = Facts::read(&file, &text)?;
    let folder = stem.rfind(['/', '\\']).map_or("", |at| &stem[..=at]);
    let data = match &facts.dataset {
        Some(dataset) => format!("{folder}{dataset}"),
        None => format!("{stem}{DATA}"),
    };
    let shown = files.display(&data);
    let mut reader = files.open(&data).map_err(|cause| SignalError::Open {
        file: shown.clone(),
        cause,
    })?;
    let bytes = reader
        .seek(SeekFrom::End(0))
        .map_err(|cause| SignalError::Io {
            file: shown.clone(),
            samples: 0,
            cause,
        })?;
    let around = facts.header_bytes.saturating_add(facts.trailing_bytes);
    let frame = 2 * facts.encoding.bytes() as u64;
    let held = bytes
        .checked_sub(around)
        .filter(|held| held.is_multiple_of(frame));
    let Some(held) = held else {
        return Err(SignalError::ImpossibleLength {
            file: shown,
            given: format!("{bytes} bytes, of which {around} are said to be no samples"),
            allowed: format!(
                "a multiple of {frame}, the bytes of one sample of datatype {}, beside these",
                facts.datatype
            ),
        });
    };
    let rate_hz = agree(
        &file,
        "the sample rate in Hz",
        options.rate_hz,
        facts.rate_hz,
    )?
    .ok_or_else(|| SignalError::MissingRate { file: file.clone() })?;
    let layout = Layout {
        file: shown,
        rate_hz,
        encoding: facts.encoding,
        channels: 2,
        start: facts.header_bytes,
        samples: held / frame,
        full_scale: options
            .full_scale
            .unwrap_or_else(|| facts.encoding.full_scale()),
    };
    Ok((reader, layout))
}

/// What the metadata say.
#[derive(Debug)]
struct Facts {
    datatype: String,
    encoding: Encoding,
    rate_hz: Option<f64>,
    dataset: Option<String>,
    header_bytes: u64,
    trailing_bytes: u64,
}

impl Facts {
    fn read(file: &str, text: &str) -> Result<Self, SignalError> {
        let malformed = |given: String, allowed: &str| SignalError::Malformed {
            file: file.to_owned(),
            given,
            allowed: allowed.to_owned(),
        };
        let document: Value = serde_json::from_str(text)
            .map_err(|error| malformed(format!("no JSON ({error})"), "SigMF metadata"))?;
        let global = document
            .get("global")
            .and_then(Value::as_object)
            .ok_or_else(|| malformed("no object \"global\"".to_owned(), "SigMF metadata"))?;
        let datatype = global
            .get("core:datatype")
            .and_then(Value::as_str)
            .ok_or_else(|| {
                malformed(
                    "no core:datatype".to_owned(),
                    "a text such as \"cf32_le\" in \"global\"",
                )
            })?;
        let encoding = DATATYPES
            .iter()
            .find(|(name, _)| *name == datatype)
            .map(|(_, encoding)| *encoding)
            .ok_or_else(|| {
                let names: Vec<&str> = DATATYPES.iter().map(|(name, _)| *name).collect();
                let why = if datatype.starts_with('r') {
                    " (real samples: a complex baseband is needed)"
                } else if datatype.starts_with("cu") {
                    " (unsigned samples, whose zero is not stated)"
                } else {
                    ""
                };
                malformed(
                    format!("core:datatype \"{datatype}\"{why}"),
                    &names.join(", "),
                )
            })?;
        let rate_hz = match global.get("core:sample_rate") {
            None => None,
            Some(value) => Some(
                value
                    .as_f64()
                    .filter(|rate| {
                        (super::open::RATES_HZ.0..=super::open::RATES_HZ.1).contains(rate)
                    })
                    .ok_or_else(|| {
                        malformed(
                            format!("core:sample_rate {value}"),
                            "a number of Hz, 1e-6 to 1e15",
                        )
                    })?,
            ),
        };
        if let Some(channels) = global.get("core:num_channels")
            && channels.as_u64() != Some(1)
        {
            return Err(malformed(
                format!("core:num_channels {channels}"),
                "1: interleaved channels are not read",
            ));
        }
        if global.get("core:metadata_only") == Some(&Value::Bool(true)) {
            return Err(malformed(
                "core:metadata_only true".to_owned(),
                "a recording with its samples",
            ));
        }
        let dataset = match global.get("core:dataset") {
            None => None,
            Some(value) => Some(
                value
                    .as_str()
                    .filter(|name| {
                        !name.is_empty()
                            && !name.contains(['/', '\\', '\0'])
                            && *name != ".."
                            && *name != "."
                    })
                    .ok_or_else(|| {
                        malformed(
                            format!("core:dataset {value}"),
                            "the name of a file in the same folder",
                        )
                    })?
                    .to_owned(),
            ),
        };
        let captures = match document.get("captures") {
            None => &[][..],
            Some(captures) => captures
                .as_array()
                .ok_or_else(|| malformed("captures that are no list".to_owned(), "a list"))?,
        };
        // Header bytes within the file would cut the stream of samples.
        let mut header_bytes = 0;
        for (index, capture) in captures.iter().enumerate() {
            let Some(value) = capture.get("core:header_bytes") else {
                continue;
            };
            match value.as_u64() {
                Some(bytes) if index == 0 || bytes == 0 => header_bytes += bytes,
                _ => {
                    return Err(malformed(
                        format!("core:header_bytes {value} in capture {index}"),
                        "a whole number of bytes, before the first capture only",
                    ));
                }
            }
        }
        let trailing_bytes = match global.get("core:trailing_bytes") {
            None => 0,
            Some(value) => value.as_u64().ok_or_else(|| {
                malformed(
                    format!("core:trailing_bytes {value}"),
                    "a whole number of bytes",
                )
            })?,
        };
        Ok(Self {
            datatype: datatype.to_owned(),
            encoding,
            rate_hz,
            dataset,
            header_bytes,
            trailing_bytes,
        })
    }
}

/// The metadata of a recording with one stretch of samples.
pub fn sigmf_meta(datatype: &str, rate_hz: f64, description: &str) -> String {
    let document = json!({
        "global": {
            "core:datatype": datatype,
            "core:sample_rate": rate_hz,
            "core:version": "1.0.0",
            "core:num_channels": 1,
            "core:description": description,
            "core:recorder": format!("quietedge {}", env!("CARGO_PKG_VERSION")),
        },
        "captures": [{ "core:sample_start": 0 }],
        "annotations": [],
    });
    format!("{document:#}\n")
}
