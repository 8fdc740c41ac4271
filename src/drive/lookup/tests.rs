//! Words by hand, and words that do not fit.

use super::*;
use proptest::prelude::*;

fn size(depth: usize, address_bits: u32, amplitude_bits: u32, phase_bits: u32) -> LookupSize {
    LookupSize {
        depth,
        address_bits,
        amplitude_bits,
        phase_bits,
    }
}

fn table(size: LookupSize, between: Between, words: Vec<Word>) -> Lookup {
    Lookup::new(size, Spacing::Magnitude, between, 8, words).unwrap()
}

#[test]
fn a_straight_table_hands_the_address_through() {
    for between in [Between::Nearest, Between::Linear] {
        let words = (0..256).map(|control| Word { control, phase: 0 }).collect();
        let lookup = table(size(256, 8, 8, 8), between, words);
        for code in 0..256u32 {
            let word = lookup.word(f64::from(code) / 255.0);
            assert_eq!(
                word,
                Word {
                    control: code,
                    phase: 0
                }
            );
        }
    }
}

#[test]
fn lines_between_entries_by_hand() {
    // Two entries, address 0 to 15: address 3 lies a fifth of the way; 10 + 0.2 * 7 = 11.4 -> 11.
    let words = vec![
        Word {
            control: 10,
            phase: 120,
        },
        Word {
            control: 17,
            phase: -120,
        },
    ];
    let lookup = table(size(2, 4, 8, 8), Between::Linear, words);
    let word = lookup.word(3.0 / 15.0);
    // The phase goes the short way, over half a turn: 120 + 0.2 * 16 = 123.2 -> 123.
    assert_eq!(
        word,
        Word {
            control: 11,
            phase: 123
        }
    );
    assert_eq!(
        lookup.word(1.0),
        Word {
            control: 17,
            phase: -120
        }
    );
    assert_eq!(
        lookup.word(7.0),
        Word {
            control: 17,
            phase: -120
        }
    );
    assert_eq!(lookup.word(f64::NAN).control, 10);
}

#[test]
fn words_that_do_not_fit_are_refused() {
    let good = vec![
        Word {
            control: 0,
            phase: 0
        };
        4
    ];
    let make = |size, words| Lookup::new(size, Spacing::Magnitude, Between::Linear, 8, words);
    assert!(make(size(4, 4, 4, 4), good.clone()).is_ok());
    assert!(matches!(
        make(size(5, 4, 4, 4), good.clone()),
        Err(LookupError::Count { .. })
    ));
    assert!(matches!(
        make(size(4, 25, 4, 4), good.clone()),
        Err(LookupError::Size { .. })
    ));
    let mut words = good.clone();
    words[2].phase = 8;
    assert!(matches!(
        make(size(4, 4, 4, 4), words),
        Err(LookupError::Word { index: 2, .. })
    ));
    let mu = Lookup::new(
        size(4, 4, 4, 4),
        Spacing::Companded { mu: -1.0 },
        Between::Linear,
        8,
        good.clone(),
    );
    assert!(matches!(mu, Err(LookupError::Mu { .. })));
    let rate = Lookup::new(size(4, 4, 4, 4), Spacing::Power, Between::Linear, 12, good);
    assert!(matches!(rate, Err(LookupError::Rate { given: 12 })));
}

#[test]
fn mu_law_by_its_formula() {
    // Python 3.11: math.log1p(255 * 0.1) / math.log1p(255) = 0.590971...
    let law = Spacing::Companded { mu: 255.0 };
    assert!((law.position(0.1) - (26.5f64).ln() / 256f64.ln()).abs() < 1e-15);
}

proptest! {
    #[test]
    fn spacings_are_undone(p in 0.0f64..=1.0, mu in 0.1f64..1000.0) {
        for law in [Spacing::Magnitude, Spacing::Power, Spacing::Companded { mu }] {
            prop_assert!((law.position(law.magnitude(p)) - p).abs() < 1e-12);
        }
    }

    #[test]
    fn words_stay_within_their_bits(
        m in -1.0f64..3.0,
        entries in prop::collection::vec((0u32..64, -16i32..16), 2..40),
        address_bits in 1u32..=24,
    ) {
        let words: Vec<_> = entries.iter().map(|&(control, phase)| Word { control, phase }).collect();
        let lookup = table(size(words.len(), address_bits, 6, 5), Between::Linear, words);
        let word = lookup.word(m);
        prop_assert!(word.control < 64 && (-16..16).contains(&word.phase));
    }
}
