//! What holds for any samples and any bytes.

use num_complex::Complex64;
use proptest::prelude::*;
use quietedge::signal::{Format, FormatOptions, open, open_pulses};

use super::{ALL, Memory, held, name_of, read_all, read_edges, written};

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
