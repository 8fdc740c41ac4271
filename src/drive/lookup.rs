//! A static table as the front end applies it: integer words over the wanted magnitude.
//!
//! ```text
//! position  p = spacing(m)                  m: wanted magnitude, 0 to 1 of the control's range
//! address   a = round(p (2^A - 1))          A address bits
//! nearest   k = round(a (D - 1) / (2^A - 1))                       D entries
//! linear    between the entries on both sides of a (D - 1) / (2^A - 1), rounded to the words' steps
//! control   c / (2^B - 1) of full range     c: unsigned word of B bits
//! phase     2 pi q / 2^P                    q: two's complement word of P bits
//! ```
//!
//! Halves round upwards. The first entry stands at magnitude 0, the last at 1; above 1 the last one is kept.

use std::f64::consts::TAU;

use num_complex::Complex64;

/// How addresses are spread over the magnitude `m`, both 0 to 1.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
#[serde(tag = "law", rename_all = "snake_case")]
pub enum Spacing {
    /// `p = m`.
    Magnitude,
    /// `p = m^2`: evenly in power, dense at the top.
    Power,
    /// `p = ln(1 + mu m) / ln(1 + mu)`, the mu-law: dense at the bottom.
    ///
    /// B. Smith, "Instantaneous companding of quantized signals", Bell Syst. Tech. J., May 1957.
    Companded {
        /// More than 0; at 0 the law would be even in magnitude.
        mu: f64,
    },
}

impl Spacing {
    /// Where the magnitude `m` (0 to 1) stands among the addresses, 0 to 1.
    pub fn position(self, m: f64) -> f64 {
        match self {
            Self::Magnitude => m,
            Self::Power => m * m,
            Self::Companded { mu } => (mu * m).ln_1p() / mu.ln_1p(),
        }
    }

    /// The magnitude at position `p`: the inverse of [`Spacing::position`].
    pub fn magnitude(self, p: f64) -> f64 {
        match self {
            Self::Magnitude => p,
            Self::Power => p.sqrt(),
            Self::Companded { mu } => (p * mu.ln_1p()).exp_m1() / mu,
        }
    }
}

/// What is done between two entries.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Between {
    /// The nearer entry counts.
    Nearest,
    /// A straight line, rounded to the words' steps.
    Linear,
}

/// Sizes of a table.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct LookupSize {
    /// Entries, [`LookupSize::DEPTHS`].
    pub depth: usize,
    /// Bits of the address, [`LookupSize::BITS`].
    pub address_bits: u32,
    /// Bits of the control's words, [`LookupSize::BITS`].
    pub amplitude_bits: u32,
    /// Bits of the phase's words, [`LookupSize::BITS`].
    pub phase_bits: u32,
}

impl LookupSize {
    /// Allowed numbers of entries.
    pub const DEPTHS: (usize, usize) = (2, 65_536);
    /// Allowed widths of every word.
    pub const BITS: (u32, u32) = (1, 24);

    /// True where every size is allowed.
    pub fn is_allowed(&self) -> bool {
        let depth = (Self::DEPTHS.0..=Self::DEPTHS.1).contains(&self.depth);
        let bits = |bits: u32| (Self::BITS.0..=Self::BITS.1).contains(&bits);
        depth && bits(self.address_bits) && bits(self.amplitude_bits) && bits(self.phase_bits)
    }

    /// Highest word of the control.
    pub fn top_word(&self) -> u32 {
        (1 << self.amplitude_bits) - 1
    }

    /// One step of the control, as a part of its range.
    pub fn control_step(&self) -> f64 {
        1.0 / f64::from(self.top_word())
    }

    /// One step of the phase, rad.
    pub fn phase_step_rad(&self) -> f64 {
        TAU / f64::from(1u32 << self.phase_bits)
    }

    /// Bits held by all entries together.
    pub fn stored_bits(&self) -> u64 {
        self.depth as u64 * u64::from(self.amplitude_bits + self.phase_bits)
    }

    /// The control's word nearest to the fraction `control` of full range, held within the words.
    pub fn control_word(&self, control: f64) -> u32 {
        // A number that is none becomes 0.
        (control.clamp(0.0, 1.0) * f64::from(self.top_word()) + 0.5).floor() as u32
    }

    /// The phase's word nearest to `phase_rad`, whole turns taken off.
    pub fn phase_word(&self, phase_rad: f64) -> i32 {
        let turns = f64::from(1u32 << self.phase_bits);
        self.wrapped((phase_rad / TAU * turns + 0.5).floor().rem_euclid(turns) as i64)
    }

    /// `word` modulo a turn, from minus half a turn to just below half.
    fn wrapped(&self, word: i64) -> i32 {
        let (turn, half) = (1i64 << self.phase_bits, 1i64 << (self.phase_bits - 1));
        ((word + half).rem_euclid(turn) - half) as i32
    }
}

/// Words that do not make a table.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum LookupError {
    /// A size outside what is allowed.
    #[error(
        "a table of {} entries with {} address, {} amplitude and {} phase bits: 2 to 65536 entries and 1 to 24 bits each are allowed",
        given.depth, given.address_bits, given.amplitude_bits, given.phase_bits
    )]
    Size {
        /// What was asked for.
        given: LookupSize,
    },
    /// A parameter of the spacing that is not positive and finite.
    #[error("mu = {given} of the companding: a positive finite number is allowed")]
    Mu {
        /// What was asked for.
        given: f64,
    },
    /// Another number of words than entries.
    #[error("{given} words for {depth} entries: as many as entries are needed")]
    Count {
        /// Words given.
        given: usize,
        /// Entries.
        depth: usize,
    },
    /// A word that its bits cannot hold.
    #[error(
        "entry {index}: control word {control}, phase word {phase}: they do not fit their bits"
    )]
    Word {
        /// From 0.
        index: usize,
        /// Control word.
        control: u32,
        /// Phase word.
        phase: i32,
    },
    /// A rate that is no power of two within what is allowed.
    #[error(
        "a table at {given} times the signal's rate: 1, 2, 4, ... {MAX_TABLE_RATE} are allowed"
    )]
    Rate {
        /// What was asked for.
        given: usize,
    },
}

/// The fastest table, in times the signal's rate: the chain samples four times as fast.
pub const MAX_TABLE_RATE: usize = 64;

/// What the table gives for one magnitude.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Word {
    /// Unsigned, of the amplitude's bits.
    pub control: u32,
    /// Two's complement, of the phase's bits.
    pub phase: i32,
}

/// A table of integer words.
#[derive(Debug, Clone, PartialEq)]
pub struct Lookup {
    size: LookupSize,
    spacing: Spacing,
    between: Between,
    rate: usize,
    words: Vec<Word>,
}

impl Lookup {
    /// A table of `words`, evenly spread over the positions of `spacing`, applied at `rate` times the
    /// signal's rate and held in between.
    ///
    /// # Errors
    /// [`LookupError`].
    pub fn new(
        size: LookupSize,
        spacing: Spacing,
        between: Between,
        rate: usize,
        words: Vec<Word>,
    ) -> Result<Self, LookupError> {
        if !size.is_allowed() {
            return Err(LookupError::Size { given: size });
        }
        if let Spacing::Companded { mu } = spacing
            && !(mu > 0.0 && mu.is_finite())
        {
            return Err(LookupError::Mu { given: mu });
        }
        if !rate.is_power_of_two() || rate > MAX_TABLE_RATE {
            return Err(LookupError::Rate { given: rate });
        }
        if words.len() != size.depth {
            return Err(LookupError::Count {
                given: words.len(),
                depth: size.depth,
            });
        }
        let half = 1i64 << (size.phase_bits - 1);
        for (index, word) in words.iter().enumerate() {
            let phase = i64::from(word.phase);
            if word.control > size.top_word() || phase < -half || phase >= half {
                return Err(LookupError::Word {
                    index,
                    control: word.control,
                    phase: word.phase,
                });
            }
        }
        Ok(Self {
            size,
            spacing,
            between,
            rate,
            words,
        })
    }

    /// Its sizes.
    pub fn size(&self) -> &LookupSize {
        &self.size
    }

    /// How its addresses are spread.
    pub fn spacing(&self) -> Spacing {
        self.spacing
    }

    /// What is done between entries.
    pub fn between(&self) -> Between {
        self.between
    }

    /// How often it is applied, in times the signal's rate.
    pub fn rate(&self) -> usize {
        self.rate
    }

    /// Its entries, from magnitude 0 to 1.
    pub fn words(&self) -> &[Word] {
        &self.words
    }

    /// The magnitude at which entry `index` stands.
    pub fn magnitude(&self, index: usize) -> f64 {
        self.spacing
            .magnitude(index as f64 / (self.size.depth - 1) as f64)
    }

    /// The address of the magnitude `m`; those above 1 have the last one.
    pub fn address(&self, m: f64) -> u32 {
        let top = f64::from((1u32 << self.size.address_bits) - 1);
        (self.spacing.position(m.clamp(0.0, 1.0)) * top + 0.5).floor() as u32
    }

    /// The words for the magnitude `m`: whole numbers throughout once the address is known.
    pub fn word(&self, m: f64) -> Word {
        let steps = (self.size.depth - 1) as u64;
        let top = (1u64 << self.size.address_bits) - 1;
        let scaled = u64::from(self.address(m)) * steps;
        let (low, rest) = match self.between {
            Between::Nearest => ((2 * scaled + top) / (2 * top), 0),
            Between::Linear => (scaled / top, scaled % top),
        };
        let left = self.words[(low as usize).min(self.words.len() - 1)];
        if rest == 0 {
            return left;
        }
        let right = self.words[(low as usize + 1).min(self.words.len() - 1)];
        let line = |rise: i64| {
            let (top, rest) = (top as i64, rest as i64);
            (2 * rise * rest + top).div_euclid(2 * top)
        };
        let control =
            i64::from(left.control) + line(i64::from(right.control) - i64::from(left.control));
        let turn = self
            .size
            .wrapped(i64::from(right.phase) - i64::from(left.phase));
        Word {
            control: control as u32,
            phase: self
                .size
                .wrapped(i64::from(left.phase) + line(i64::from(turn))),
        }
    }

    /// The fraction of full range that `word` asks for.
    pub fn control(&self, word: Word) -> f64 {
        f64::from(word.control) / f64::from(self.size.top_word())
    }

    /// The correction of the phase that `word` asks for, rad.
    pub fn phase_rad(&self, word: Word) -> f64 {
        f64::from(word.phase) * self.size.phase_step_rad()
    }

    /// The correction of the phase as a phasor.
    pub fn phasor(&self, word: Word) -> Complex64 {
        Complex64::cis(self.phase_rad(word))
    }
}

#[cfg(test)]
mod tests {
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
}
