//! Signal files: what is written is read again, and no bytes make a reader panic or run away.

mod formats;
mod properties;

use std::collections::HashMap;
use std::io::{self, Cursor};

use num_complex::Complex64;
use quietedge::input::{Files, ReadSeek};
use quietedge::signal::{Edge, PulseSource, Samples, SignalError, Source, Writing, write};

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
        Writing::WavInt16 | Writing::Ci16 | Writing::SigmfCi16 => code(32_768.0),
        Writing::WavInt24 => code(8_388_608.0),
        Writing::WavFloat | Writing::Cf32 | Writing::NpyComplex64 | Writing::SigmfCf32 => {
            f64::from(x as f32)
        }
        Writing::Csv | Writing::NpyComplex128 => x,
    }
}
