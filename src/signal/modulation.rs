//! Constellations: Gray-mapped points of unit mean power.

use num_complex::Complex64;
use rand::Rng;
use serde::Serialize;
use std::f64::consts::{FRAC_PI_4, SQRT_2};

/// How bits become points.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Modulation {
    /// Four points at odd multiples of 45 degrees; one bit an axis.
    Qpsk,
    /// Differential: a pair of bits turns the phase by 00: +45, 01: +135, 11: -135, 10: -45 degrees.
    Pi4Dqpsk,
    /// Eight phases, point 0 at 0 degrees.
    Psk8,
    /// Two Gray-coded bits an axis.
    Qam16,
    /// Three Gray-coded bits an axis.
    Qam64,
}

impl Modulation {
    /// Bits of one symbol.
    pub fn bits(self) -> u32 {
        match self {
            Self::Qpsk | Self::Pi4Dqpsk => 2,
            Self::Psk8 => 3,
            Self::Qam16 => 4,
            Self::Qam64 => 6,
        }
    }

    /// The point that `word` (below `2^bits`) stands for; unit mean power over all words. For
    /// [`Modulation::Pi4Dqpsk`] it is the turn from the symbol before.
    pub fn point(self, word: u32) -> Complex64 {
        match self {
            Self::Qpsk => axes(word, 1) / SQRT_2,
            Self::Pi4Dqpsk => {
                let eighths = [1.0, 3.0, -1.0, -3.0][(word & 3) as usize];
                Complex64::from_polar(1.0, eighths * FRAC_PI_4)
            }
            Self::Psk8 => Complex64::from_polar(1.0, f64::from(from_gray(word & 7)) * FRAC_PI_4),
            Self::Qam16 => axes(word, 2) / 10f64.sqrt(),
            Self::Qam64 => axes(word, 3) / 42f64.sqrt(),
        }
    }

    /// `count` symbols of random words.
    pub(super) fn draw(self, count: usize, random: &mut impl Rng) -> Vec<Complex64> {
        let word = |random: &mut _| Rng::next_u32(random) >> (32 - self.bits());
        if self != Self::Pi4Dqpsk {
            return (0..count).map(|_| self.point(word(random))).collect();
        }
        // Counted in eighths of a turn: the phase of the millionth symbol is as exact as the first.
        let mut eighths = 0;
        (0..count)
            .map(|_| {
                eighths = (eighths + [1, 3, 7, 5][word(random) as usize]) % 8;
                Complex64::from_polar(1.0, f64::from(eighths) * FRAC_PI_4)
            })
            .collect()
    }
}

/// Odd levels on both axes; the high `bits` of the word are I, the low ones Q. Gray code 0 is the most
/// positive level.
fn axes(word: u32, bits: u32) -> Complex64 {
    let mask = (1 << bits) - 1;
    let level = |gray: u32| f64::from(mask) - 2.0 * f64::from(from_gray(gray & mask));
    Complex64::new(level(word >> bits), level(word))
}

/// The number whose Gray code is `gray` (words of at most 8 bits).
fn from_gray(gray: u32) -> u32 {
    let half = gray ^ (gray >> 4);
    let quarter = half ^ (half >> 2);
    quarter ^ (quarter >> 1)
}

#[cfg(test)]
mod tests {
    use super::*;

    const ALL: [Modulation; 5] = [
        Modulation::Qpsk,
        Modulation::Pi4Dqpsk,
        Modulation::Psk8,
        Modulation::Qam16,
        Modulation::Qam64,
    ];

    #[test]
    fn points_have_unit_power_and_neighbours_differ_in_one_bit() {
        for modulation in ALL {
            let words = 1u32 << modulation.bits();
            let points: Vec<_> = (0..words).map(|word| modulation.point(word)).collect();
            let mean = points.iter().map(Complex64::norm_sqr).sum::<f64>() / f64::from(words);
            assert!((mean - 1.0).abs() < 1e-14, "{modulation:?}: {mean}");

            let distance = |a: usize, b: usize| (points[a] - points[b]).norm();
            let nearest = (1..words as usize)
                .map(|b| distance(0, b))
                .fold(f64::INFINITY, f64::min);
            for a in 0..words as usize {
                for b in 0..a {
                    assert!(distance(a, b) > nearest - 1e-12, "{modulation:?}");
                    if distance(a, b) < nearest + 1e-12 {
                        assert_eq!((a ^ b).count_ones(), 1, "{modulation:?}: {a:b} {b:b}");
                    }
                }
            }
        }
    }
}
