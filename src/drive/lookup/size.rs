//! How large a table is, how its addresses are spread, and what makes none.

use std::f64::consts::TAU;

use super::MAX_TABLE_RATE;

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
    pub(super) fn wrapped(&self, word: i64) -> i32 {
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
