//! Each format, its variants and its limits.

use std::io::Cursor;

use num_complex::Complex64;
use quietedge::input::Document;
use quietedge::signal::{Edge, Format, FormatOptions, Samples, Writing, open, open_pulses, write};

use super::{Memory, read_all, read_edges};

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
fn numbers_beyond_reason_are_refused() {
    let bytes = [0.25f32.to_le_bytes(), 0.5f32.to_le_bytes()].concat();
    let files = Memory::default()
        .with("x.cf32", bytes)
        .with("x.csv", "i,q\n1e300,0\n");
    let message = |name: &str, rate_hz, full_scale| {
        let options = FormatOptions {
            rate_hz: Some(rate_hz),
            full_scale: Some(full_scale),
            ..FormatOptions::default()
        };
        let read = open(&files, name, &options).and_then(|mut source| read_all(source.as_mut(), 8));
        read.err()
            .map(|error| error.to_string())
            .unwrap_or_default()
    };
    assert_eq!(message("x.cf32", 1.0, 1.0), "");
    for rate_hz in [0.0, -1.0, f64::NAN, f64::INFINITY] {
        assert!(message("x.cf32", rate_hz, 1.0).contains("a sample rate in Hz of"));
    }
    for full_scale in [0.0, -1.0, f64::NAN, f64::MIN_POSITIVE] {
        assert!(message("x.cf32", 1.0, full_scale).contains("a full scale of"));
    }
    assert!(message("x.csv", 1.0, 1e-10).contains("sample 0 (counted from 0) is inf"));
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
    assert!(message.contains("more than 65536 bytes"), "{message}");
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
