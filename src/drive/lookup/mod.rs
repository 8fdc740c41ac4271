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

mod size;

#[cfg(test)]
mod tests;

use num_complex::Complex64;

pub use size::{Between, LookupError, LookupSize, Spacing};

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
