//! Signal files: what is written is read again, and no bytes make a reader panic or run away.

use std::collections::HashMap;
use std::io::{self, Cursor};

use num_complex::Complex64;
use proptest::prelude::*;
use quietedge::input::{Document, Files, ReadSeek};
use quietedge::signal::{
    Edge, Format, FormatOptions, PulseSource, Samples, SignalError, Source, Writing, open,
    open_pulses, write,
};

/// Files in memory.
#[derive(Default)]
struct Memory(HashMap<String, Vec<u8>>);

impl Memory {
    fn with(mut self, name: &str, bytes: impl Into<Vec<u8>>) -> Self {
        self.0.insert(name.to_owned(), bytes.into());
        self
    }
}

impl Files for Memory {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        match self.0.get(name) {
            Some(bytes) => Ok(Box::new(Cursor::new(bytes.clone()))),
            None => Err(io::ErrorKind::NotFound.into()),
        }
    }
}

const ALL: [Writing; 8] = [
    Writing::WavInt16,
    Writing::WavInt24,
    Writing::WavFloat,
    Writing::Csv,
    Writing::Cf32,
    Writing::Ci16,
    Writing::NpyComplex64,
    Writing::NpyComplex128,
];

fn name_of(writing: Writing) -> String {
    format!("x.{}", writing.format().name())
}

/// Writes `samples` with their sidecar.
fn written(samples: &[Complex64], rate_hz: f64, writing: Writing) -> Memory {
    let mut bytes = Cursor::new(Vec::new());
    let mut source = Samples::new(rate_hz, samples.to_vec());
    let count = write(&mut source, writing, &mut bytes, "x").unwrap();
    assert_eq!(count, samples.len() as u64);
    let name = name_of(writing);
    let files = Memory::default().with(&name, bytes.into_inner());
    match writing.sidecar(rate_hz) {
        Some(text) => files.with(&format!("{name}.toml"), text),
        None => files,
    }
}

fn read_all(source: &mut dyn Source, step: usize) -> Result<Vec<Complex64>, SignalError> {
    let mut all = Vec::new();
    let mut block = vec![Complex64::ZERO; step];
    loop {
        match source.read(&mut block)? {
            0 => return Ok(all),
            count => all.extend_from_slice(&block[..count]),
        }
    }
}

fn read_edges(source: &mut dyn PulseSource) -> Result<Vec<Edge>, SignalError> {
    let mut all = Vec::new();
    let none = Edge {
        time_s: 0.0,
        level: 0.0,
    };
    let mut block = [none; 3];
    loop {
        match source.read(&mut block)? {
            0 => return Ok(all),
            count => all.extend_from_slice(&block[..count]),
        }
    }
}

/// The value nearest to `x` that `writing` can hold.
fn held(x: f64, writing: Writing) -> f64 {
    let code = |full: f64| (x * full).round().min(full - 1.0) / full;
    match writing {
        Writing::WavInt16 | Writing::Ci16 => code(32_768.0),
        Writing::WavInt24 => code(8_388_608.0),
        Writing::WavFloat | Writing::Cf32 | Writing::NpyComplex64 => f64::from(x as f32),
        Writing::Csv | Writing::NpyComplex128 => x,
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(48))]

    /// Written and read again is the same, bit by bit; and again after a rewind, in other blocks.
    #[test]
    fn round_trips_are_lossless(
        parts in prop::collection::vec((-1.0f64..=1.0, -1.0f64..=1.0), 1..300),
        rate_hz in 1u32..500_000_000, step in 1usize..70, fraction in 0.0f64..1.0,
    ) {
        let samples: Vec<_> = parts.iter().map(|(re, im)| Complex64::new(*re, *im)).collect();
        for writing in ALL {
            let whole_hz = writing.format() == Format::Wav;
            let rate_hz = f64::from(rate_hz) + if whole_hz { 0.0 } else { fraction };
            let files = written(&samples, rate_hz, writing);
            let mut source = open(&files, &name_of(writing), &FormatOptions::default()).unwrap();
            prop_assert_eq!(source.rate_hz(), rate_hz);
            if let Some(len) = source.len() {
                prop_assert_eq!(len, samples.len() as u64);
            }
            let expected: Vec<_> = samples
                .iter()
                .map(|x| Complex64::new(held(x.re, writing), held(x.im, writing)))
                .collect();
            prop_assert_eq!(&read_all(source.as_mut(), step).unwrap(), &expected);
            source.rewind().unwrap();
            prop_assert_eq!(&read_all(source.as_mut(), 1000).unwrap(), &expected);
            // What a format can hold survives any number of further trips.
            let again = written(&expected, rate_hz, writing);
            let mut source = open(&again, &name_of(writing), &FormatOptions::default()).unwrap();
            prop_assert_eq!(&read_all(source.as_mut(), step).unwrap(), &expected);
        }
    }
}

/// Reads `bytes` under every name and option; the number of samples is bounded by the bytes.
fn survive(bytes: &[u8]) {
    let options = FormatOptions {
        rate_hz: Some(48e3),
        ..FormatOptions::default()
    };
    for (extension, _) in Format::ALL {
        let name = format!("x.{extension}");
        let files = Memory::default().with(&name, bytes);
        for options in [options, FormatOptions::default()] {
            if let Ok(mut source) = open(&files, &name, &options)
                && let Ok(samples) = read_all(source.as_mut(), 64)
            {
                assert!(samples.len() * 4 <= bytes.len() + 4);
                assert!(samples.iter().all(|x| x.re.is_finite() && x.im.is_finite()));
            }
            if let Ok(mut source) = open_pulses(&files, &name, &options)
                && let Ok(edges) = read_edges(source.as_mut())
            {
                assert!(edges.len() * 2 <= bytes.len() + 2);
                assert!(edges.is_sorted_by(|a, b| a.time_s < b.time_s));
            }
        }
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(400))]

    /// Bytes of no meaning.
    #[test]
    fn random_bytes_never_panic(bytes in prop::collection::vec(any::<u8>(), 0..400)) {
        survive(&bytes);
    }

    /// Good files with a few bytes changed and the end cut off.
    #[test]
    fn damaged_files_never_panic(
        which in 0usize..ALL.len(),
        damage in prop::collection::vec((0usize..220, any::<u8>()), 0..6),
        keep in 0usize..400,
    ) {
        let samples = vec![Complex64::new(0.25, -0.5); 20];
        let mut files = written(&samples, 48e3, ALL[which]);
        let mut bytes = files.0.remove(&name_of(ALL[which])).unwrap();
        for (at, value) in damage {
            if let Some(byte) = bytes.get_mut(at) {
                *byte = value;
            }
        }
        bytes.truncate(keep);
        survive(&bytes);
    }

    /// Text that is nearly a table.
    #[test]
    fn near_text_never_panics(text in "(i,q|q,i|time,level)?\n([0-9.,;\"e\\-#in \r\n]{0,200})") {
        survive(text.as_bytes());
    }
}

#[test]
fn wav_files_of_another_writer_are_read() {
    // Python 3.11 wave module: 2 channels, 24-bit, 8000 Hz, frames (1, -1), (-8388608, 8388607):
    // wave.open(f, "wb"), setparams((2, 3, 8000, 0, "NONE", "")), writeframes(...); bytes as printed.
    let hex = "524946463000000057415645666d74201000000001000200401f000080bb000006001800646174610c000000010000ffffff000080ffff7f";
    let bytes: Vec<u8> = (0..hex.len() / 2)
        .map(|at| u8::from_str_radix(&hex[2 * at..2 * at + 2], 16).unwrap())
        .collect();
    let files = Memory::default().with("x.wav", bytes);
    let mut source = open(&files, "x.wav", &FormatOptions::default()).unwrap();
    assert_eq!(source.rate_hz(), 8000.0);
    let full = 8_388_608.0;
    assert_eq!(
        read_all(source.as_mut(), 8).unwrap(),
        [
            Complex64::new(1.0 / full, -1.0 / full),
            Complex64::new(-1.0, 8_388_607.0 / full)
        ]
    );
}

/// A WAV file of 16-bit stereo with `chunks` between the header and the samples.
fn riff(tag: &[u8; 4], chunks: &[u8], data_size: u32, data: &[u8]) -> Vec<u8> {
    let mut bytes = [tag, &[0xff; 4][..], b"WAVE"].concat();
    bytes.extend(chunks);
    bytes.extend(b"fmt \x10\0\0\0\x01\0\x02\0\x80\xbb\0\0\0\xee\x02\0\x04\0\x10\0");
    bytes.extend(b"data");
    bytes.extend(data_size.to_le_bytes());
    bytes.extend(data);
    bytes
}

#[test]
fn odd_chunks_and_wide_sizes_are_read() {
    let data = [0, 0x40, 0, 0xc0];
    let odd = riff(b"RIFF", b"LIST\x03\0\0\0abc\0", 4, &data);
    let mut ds64 = b"ds64\x1c\0\0\0".to_vec();
    ds64.extend([0; 8]);
    ds64.extend(4u64.to_le_bytes());
    ds64.extend([0; 12]);
    let wide = riff(b"RF64", &ds64, u32::MAX, &data);
    for bytes in [odd, wide] {
        let files = Memory::default().with("x.wav", bytes);
        let mut source = open(&files, "x.wav", &FormatOptions::default()).unwrap();
        assert_eq!(
            read_all(source.as_mut(), 8).unwrap(),
            [Complex64::new(0.5, -0.5)]
        );
    }
}

#[test]
fn big_endian_and_wide_arrays_are_read() {
    // NumPy 2.4.6, numpy.save of one complex number as '>c8' and '>c16'.
    for (kind, bytes) in [
        (
            ">c8",
            [0.5f32.to_be_bytes(), (-2f32).to_be_bytes()].concat(),
        ),
        (
            ">c16",
            [0.5f64.to_be_bytes(), (-2f64).to_be_bytes()].concat(),
        ),
    ] {
        let header = format!("{{'descr': '{kind}', 'fortran_order': False, 'shape': (1,), }}\n");
        let mut file = b"\x93NUMPY\x01\0".to_vec();
        file.extend((header.len() as u16).to_le_bytes());
        file.extend(header.as_bytes());
        file.extend(bytes);
        let files = Memory::default()
            .with("x.npy", file)
            .with("x.npy.toml", "rate = \"1 MHz\"\nfull_scale = 2");
        let mut source = open(&files, "x.npy", &FormatOptions::default()).unwrap();
        assert_eq!(
            read_all(source.as_mut(), 8).unwrap(),
            [Complex64::new(0.25, -1.0)]
        );
    }
}

#[test]
fn integers_scale_by_their_full_scale() {
    let bytes: Vec<u8> = [1024i16, -2048]
        .iter()
        .flat_map(|x| x.to_le_bytes())
        .collect();
    let read = |sidecar: &str| {
        let files = Memory::default()
            .with("x.ci16", bytes.clone())
            .with("x.ci16.toml", sidecar);
        read_all(
            open(&files, "x.ci16", &FormatOptions::default())
                .unwrap()
                .as_mut(),
            8,
        )
        .unwrap()
    };
    assert_eq!(
        read("rate = 1000\nfull_scale = 2048"),
        [Complex64::new(0.5, -1.0)]
    );
    assert_eq!(
        read("rate = 1000"),
        [Complex64::new(1.0 / 32.0, -1.0 / 16.0)]
    );
}

#[test]
fn settings_state_format_and_rate() {
    let text = "file = \"x.bin\"\nformat = \"cf32\"\nrate = \"48 kHz\"\nfull_scale = \"50 %\"\n";
    let document = Document::parse("study.toml", text).unwrap();
    let options = FormatOptions::from_section(&document.root()).unwrap();
    assert_eq!(
        options,
        FormatOptions {
            format: Some(Format::Cf32),
            rate_hz: Some(48e3),
            full_scale: Some(0.5)
        }
    );
    let bytes = [0.25f32.to_le_bytes(), 0.5f32.to_le_bytes()].concat();
    let files = Memory::default().with("x.bin", bytes);
    let mut source = open(&files, "x.bin", &options).unwrap();
    assert_eq!(
        read_all(source.as_mut(), 8).unwrap(),
        [Complex64::new(0.5, 1.0)]
    );
    let document = Document::parse("study.toml", "format = \"cf23\"").unwrap();
    let message = FormatOptions::from_section(&document.root())
        .unwrap_err()
        .to_string();
    assert!(message.contains("\"cf32\""), "{message}");
}

#[test]
fn columns_may_be_swapped_commented_and_quoted() {
    let text = "# captured\r\n\"Q\" , \"I\"\r\n0.5,-1e-3\r\n# more\r\n\r\n 1 , 2 \r\n";
    let files = Memory::default()
        .with("x.csv", text)
        .with("x.csv.toml", "rate = 10");
    let mut source = open(&files, "x.csv", &FormatOptions::default()).unwrap();
    let expected = [Complex64::new(-1e-3, 0.5), Complex64::new(2.0, 1.0)];
    assert_eq!(read_all(source.as_mut(), 1).unwrap(), expected);
    source.rewind().unwrap();
    assert_eq!(read_all(source.as_mut(), 8).unwrap(), expected);
}

#[test]
fn endless_lines_are_refused() {
    let files =
        Memory::default().with("x.csv", [b"i,q\n1,".to_vec(), vec![b'1'; 1 << 20]].concat());
    let options = FormatOptions {
        rate_hz: Some(1.0),
        ..FormatOptions::default()
    };
    let message = open(&files, "x.csv", &options).err().unwrap().to_string();
    assert!(message.contains("more than 4096 bytes"), "{message}");
}

#[test]
fn pulses_are_edges() {
    let csv = Memory::default().with("x.csv", "time,level\n0,1\n2.5e-6,0\n1e-5,0.5\n");
    let mut pulses = open_pulses(&csv, "x.csv", &FormatOptions::default()).unwrap();
    let edge = |time_s, level| Edge { time_s, level };
    let expected = [edge(0.0, 1.0), edge(2.5e-6, 0.0), edge(1e-5, 0.5)];
    assert_eq!(read_edges(pulses.as_mut()).unwrap(), expected);
    pulses.rewind().unwrap();
    assert_eq!(read_edges(pulses.as_mut()).unwrap(), expected);
    assert_eq!(pulses.end_s(), None);

    // Mono 16-bit at 1000 Hz: 0 0 16384 16384 -32768, held for one sample each.
    let mut wav = b"RIFF\0\0\0\0WAVEfmt \x10\0\0\0\x01\0\x01\0\xe8\x03\0\0\xd0\x07\0\0\x02\0\x10\0data\x0a\0\0\0".to_vec();
    wav.extend(
        [0i16, 0, 16_384, 16_384, -32_768]
            .iter()
            .flat_map(|x| x.to_le_bytes()),
    );
    let wav = Memory::default().with("x.wav", wav);
    let mut pulses = open_pulses(&wav, "x.wav", &FormatOptions::default()).unwrap();
    let expected = [edge(0.0, 0.0), edge(2e-3, 0.5), edge(4e-3, -1.0)];
    assert_eq!(read_edges(pulses.as_mut()).unwrap(), expected);
    pulses.rewind().unwrap();
    assert_eq!(read_edges(pulses.as_mut()).unwrap(), expected);
    assert_eq!(pulses.end_s(), Some(5e-3));
}

#[test]
fn what_a_format_cannot_hold_is_refused() {
    let try_write = |rate_hz, x: f64, writing| {
        let mut source = Samples::new(rate_hz, vec![Complex64::new(0.0, x)]);
        write(&mut source, writing, Cursor::new(Vec::new()), "x")
            .err()
            .map(|error| error.to_string())
    };
    for (rate_hz, x, writing, phrase) in [
        (1e3, 1.001, Writing::WavInt16, "beyond full scale"),
        (1e3, -1.001, Writing::Ci16, "beyond full scale"),
        (1e3, 1e39, Writing::Cf32, "32-bit floats"),
        (0.5, 0.0, Writing::WavFloat, "whole numbers of Hz"),
        (5e9, 0.0, Writing::WavInt24, "whole numbers of Hz"),
    ] {
        let message = try_write(rate_hz, x, writing).unwrap();
        assert!(message.contains(phrase), "{message}");
    }
    assert_eq!(try_write(1e3, 1.001, Writing::Cf32), None);
    assert_eq!(try_write(1e3, -1.0, Writing::WavInt16), None);
}
