//! SigMF recordings: written and read again, and refused where they lie.

use std::collections::HashMap;
use std::io::{self, Cursor};

use num_complex::Complex64;
use proptest::prelude::*;
use quietedge::input::{Files, ReadSeek};
use quietedge::signal::{FormatOptions, Samples, SignalError, Writing, open, sigmf_meta, write};

struct Memory(HashMap<String, Vec<u8>>);

impl Files for Memory {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        match self.0.get(name) {
            Some(bytes) => Ok(Box::new(Cursor::new(bytes.clone()))),
            None => Err(io::ErrorKind::NotFound.into()),
        }
    }
}

fn recording(meta: &str, data: Vec<u8>) -> Memory {
    Memory(HashMap::from([
        ("r.sigmf-meta".to_owned(), meta.as_bytes().to_vec()),
        ("r.sigmf-data".to_owned(), data),
    ]))
}

fn read(files: &Memory, name: &str) -> Result<(f64, Vec<Complex64>), SignalError> {
    let mut source = open(files, name, &FormatOptions::default())?;
    let mut out = Vec::new();
    let mut block = [Complex64::ZERO; 100];
    loop {
        let count = source.read(&mut block)?;
        if count == 0 {
            return Ok((source.rate_hz(), out));
        }
        out.extend_from_slice(&block[..count]);
    }
}

#[test]
fn what_is_written_is_read_again() {
    let samples: Vec<_> = (0..257)
        .map(|n| Complex64::new(f64::from(n) / 512.0, -f64::from(n) / 256.0 / 2.0))
        .collect();
    for (writing, datatype) in [
        (Writing::SigmfCf32, "cf32_le"),
        (Writing::SigmfCi16, "ci16_le"),
    ] {
        let mut data = Cursor::new(Vec::new());
        let mut source = Samples::new(1e6, samples.clone());
        write(&mut source, writing, &mut data, "r").unwrap();
        let files = recording(&sigmf_meta(datatype, 1.25e6, "test"), data.into_inner());
        for name in ["r.sigmf-meta", "r.sigmf-data"] {
            assert_eq!(read(&files, name).unwrap(), (1.25e6, samples.clone()));
        }
    }
}

#[test]
fn every_datatype_means_its_numbers() {
    let cases: [(&str, Vec<u8>); 8] = [
        ("ci8", vec![64, 0xc0]),
        ("ci16_le", vec![0, 0x40, 0, 0xc0]),
        ("ci16_be", vec![0x40, 0, 0xc0, 0]),
        ("ci32_be", vec![0x40, 0, 0, 0, 0xc0, 0, 0, 0]),
        (
            "cf32_le",
            [0.5f32.to_le_bytes(), (-0.5f32).to_le_bytes()].concat(),
        ),
        (
            "cf32_be",
            [0.5f32.to_be_bytes(), (-0.5f32).to_be_bytes()].concat(),
        ),
        (
            "cf64_le",
            [0.5f64.to_le_bytes(), (-0.5f64).to_le_bytes()].concat(),
        ),
        (
            "cf64_be",
            [0.5f64.to_be_bytes(), (-0.5f64).to_be_bytes()].concat(),
        ),
    ];
    for (datatype, bytes) in cases {
        // Header and trailing bytes are passed over.
        let mut data = vec![7; 3];
        data.extend(bytes);
        data.extend([9; 5]);
        let meta = format!(
            r#"{{"global":{{"core:datatype":"{datatype}","core:sample_rate":1000,"core:trailing_bytes":5,"core:version":"1.2.0"}},"captures":[{{"core:sample_start":0,"core:header_bytes":3}}],"annotations":[]}}"#
        );
        let found = read(&recording(&meta, data), "r.sigmf-meta").unwrap();
        assert_eq!(
            found,
            (1000.0, vec![Complex64::new(0.5, -0.5)]),
            "{datatype}"
        );
    }
}

#[test]
fn what_cannot_be_read_is_refused_with_its_reason() {
    let global = |inside: &str| format!(r#"{{"global":{{{inside}}},"captures":[]}}"#);
    for (meta, phrase) in [
        ("{".to_owned(), "no JSON"),
        ("[]".to_owned(), "global"),
        (global(""), "core:datatype"),
        (
            global(r#""core:datatype":"cu8","core:sample_rate":1"#),
            "unsigned",
        ),
        (
            global(r#""core:datatype":"rf32_le","core:sample_rate":1"#),
            "real samples",
        ),
        (
            global(r#""core:datatype":"cf32_le""#),
            "sample rate is not known",
        ),
        (
            global(r#""core:datatype":"cf32_le","core:sample_rate":-1"#),
            "core:sample_rate",
        ),
        (
            global(r#""core:datatype":"cf32_le","core:sample_rate":1,"core:num_channels":2"#),
            "core:num_channels",
        ),
        (
            global(r#""core:datatype":"cf32_le","core:sample_rate":1,"core:dataset":"../x""#),
            "core:dataset",
        ),
        (
            global(r#""core:datatype":"cf32_le","core:sample_rate":1,"core:trailing_bytes":1e30"#),
            "core:trailing_bytes",
        ),
        (
            global(
                r#""core:datatype":"cf32_le","core:sample_rate":1,"core:trailing_bytes":18446744073709551615"#,
            ),
            "length",
        ),
        (
            global(r#""core:datatype":"cf32_le","core:sample_rate":1,"core:metadata_only":true"#),
            "metadata_only",
        ),
        (
            global(r#""core:datatype":"cf64_le","core:sample_rate":1"#),
            "length",
        ),
    ] {
        let error = read(&recording(&meta, vec![0; 8]), "r.sigmf-meta")
            .unwrap_err()
            .to_string();
        assert!(error.contains(phrase), "{meta}: {error}");
    }
    let error = read(
        &Memory(HashMap::from([("x.sigmf".to_owned(), Vec::new())])),
        "x.sigmf",
    )
    .unwrap_err()
    .to_string();
    assert!(error.contains("archive"), "{error}");
}

proptest! {
    /// Spoilt metadata and samples are read or refused, never more.
    #[test]
    fn spoilt_recordings_do_no_harm(
        cut in 0usize..400,
        at in 0usize..400,
        byte: u8,
        data in prop::collection::vec(any::<u8>(), 0..200),
        value in "[-0-9a-z\"{}:.]{0,12}",
        key in prop::sample::select(vec!["core:sample_rate", "core:datatype", "core:num_channels", "core:header_bytes", "core:dataset"]),
    ) {
        let good = sigmf_meta("cf32_le", 1e6, "test");
        let mut bytes = good.clone().into_bytes();
        bytes.truncate(bytes.len() - cut.min(bytes.len()));
        if let Some(place) = bytes.get_mut(at) {
            *place = byte;
        }
        let mut files = recording("", data);
        files.0.insert("r.sigmf-meta".to_owned(), bytes);
        let _ = read(&files, "r.sigmf-meta");
        let text = good.replace(&format!("\"{key}\": "), &format!("\"{key}\": {value} ,\"x\":"));
        files.0.insert("r.sigmf-meta".to_owned(), text.into_bytes());
        let _ = read(&files, "r.sigmf-meta");
    }
}
