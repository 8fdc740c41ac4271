//! Files far longer than memory: headers are judged by the real size, blocks are read as they come.

use std::io::{self, Read, Seek, SeekFrom};

use num_complex::Complex64;
use quietedge::input::{Files, ReadSeek};
use quietedge::signal::{FormatOptions, SignalError, Source, open};

/// A file of `len` bytes: `head`, then zeros.
#[derive(Clone)]
struct Sparse {
    head: Vec<u8>,
    len: u64,
    at: u64,
}

impl Read for Sparse {
    fn read(&mut self, out: &mut [u8]) -> io::Result<usize> {
        let count = (out.len() as u64).min(self.len.saturating_sub(self.at)) as usize;
        for (n, byte) in out[..count].iter_mut().enumerate() {
            *byte = usize::try_from(self.at + n as u64)
                .ok()
                .and_then(|at| self.head.get(at))
                .copied()
                .unwrap_or(0);
        }
        self.at += count as u64;
        Ok(count)
    }
}

impl Seek for Sparse {
    fn seek(&mut self, to: SeekFrom) -> io::Result<u64> {
        self.at = match to {
            SeekFrom::Start(at) => at,
            SeekFrom::End(by) => self.len.saturating_add_signed(by),
            SeekFrom::Current(by) => self.at.saturating_add_signed(by),
        };
        Ok(self.at)
    }
}

impl Files for Sparse {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        if name.ends_with(".toml") {
            return Err(io::ErrorKind::NotFound.into());
        }
        Ok(Box::new(self.clone()))
    }
}

fn open_sparse(name: &str, head: &[u8], len: u64) -> Result<Box<dyn Source>, SignalError> {
    let file = Sparse {
        head: head.to_vec(),
        len,
        at: 0,
    };
    let options = FormatOptions {
        rate_hz: Some(48e3),
        ..FormatOptions::default()
    };
    open(&file, name, &options)
}

const FMT: &[u8] = b"fmt \x10\0\0\0\x01\0\x02\0\x80\xbb\0\0\0\xee\x02\0\x04\0\x10\0";

#[test]
fn raw_files_may_have_any_length() {
    let mut source = open_sparse("x.cf32", &[], 1 << 43).unwrap();
    assert_eq!(source.len(), Some(1 << 40));
    let mut block = vec![Complex64::ONE; 1000];
    assert_eq!(source.read(&mut block).unwrap(), 1000);
    assert!(block.iter().all(|x| *x == Complex64::ZERO));
}

#[test]
fn wav_files_past_4_gib_need_wide_sizes() {
    let five_gib = 5u64 << 30;
    let wide = [
        &b"RF64\xff\xff\xff\xffWAVEds64\x1c\0\0\0"[..],
        &[0; 8],
        &five_gib.to_le_bytes(),
        &[0; 12],
        FMT,
        b"data\xff\xff\xff\xff",
    ]
    .concat();
    let source = open_sparse("x.wav", &wide, wide.len() as u64 + five_gib).unwrap();
    assert_eq!(source.len(), Some(five_gib / 4));

    // A header that counts modulo 4 GiB: 1 GiB stated, 5 GiB there.
    let narrow = [
        &b"RIFF\0\0\0\x40WAVE"[..],
        FMT,
        b"data",
        &(1u32 << 30).to_le_bytes(),
    ]
    .concat();
    let message = open_sparse("x.wav", &narrow, narrow.len() as u64 + five_gib + 8)
        .err()
        .unwrap()
        .to_string();
    assert!(message.contains("more than 4 GiB"), "{message}");
}
