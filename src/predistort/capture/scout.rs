//! A robust line through each cell of the cloud, from some of its pairs.
//!
//! `v = y x* / |x|` is fitted by a complex line over `|x|` in every cell, starting from the median and reweighted as
//! P. J. Huber, "Robust estimation of a location parameter", Ann. Math. Statist., 1964 (from memory): a pair farther
//! than 1.345 spreads counts with its distance, not with its square.

use num_complex::Complex64;

/// Cells over the wanted magnitude.
pub(super) const CELLS: usize = 128;

/// Pairs kept a cell.
const KEPT: usize = 2048;

/// A cell with fewer pairs says nothing.
pub(in crate::predistort) const FEWEST: usize = 8;

/// Distance, in spreads, from which on a pair counts less (95 % of the efficiency of least squares on Gaussian noise).
const HUBER: f64 = 1.345;

/// Rounds of reweighting.
const ROUNDS: usize = 12;

/// `sqrt(2 ln 2)`: the median of a Rayleigh distance over its spread by axis.
const RAYLEIGH_MEDIAN: f64 = 1.177_410_022_515_474_6;

/// Evenly taken pairs of one cell.
#[derive(Debug, Clone, Default)]
struct Kept {
    seen: usize,
    every: usize,
    pairs: Vec<(f64, Complex64)>,
}

impl Kept {
    fn push(&mut self, pair: (f64, Complex64)) {
        let every = self.every.max(1);
        if self.seen.is_multiple_of(every) {
            self.pairs.push(pair);
            if self.pairs.len() == KEPT {
                let mut index = 0;
                self.pairs.retain(|_| {
                    index += 1;
                    index % 2 == 1
                });
                self.every = 2 * every;
            }
        }
        self.seen += 1;
    }
}

/// Looks at a pair of streams for the first time.
#[derive(Debug, Clone)]
pub struct Scout {
    peak: f64,
    unscale: Complex64,
    cells: Vec<Kept>,
}

/// One cell's line.
#[derive(Debug, Clone, Copy)]
pub(super) struct Line {
    pub(super) middle: f64,
    pub(super) value: Complex64,
    pub(super) slope: Complex64,
    /// Spread by axis.
    pub(super) spread: f64,
}

impl Line {
    pub(super) fn at(&self, magnitude: f64) -> Complex64 {
        self.value + self.slope * (magnitude - self.middle)
    }
}

/// Robust lines, one for each cell that holds enough.
#[derive(Debug, Clone)]
pub struct ScoutLines {
    pub(super) peak: f64,
    pub(super) unscale: Complex64,
    pub(super) lines: Vec<Option<Line>>,
}

impl ScoutLines {
    /// What the lines say the output for `x` is, the phase included; nothing where they say nothing.
    pub fn predicted(&self, x: Complex64) -> Option<Complex64> {
        let magnitude = x.norm();
        let line = self.lines[cell(magnitude, self.peak)]?;
        (magnitude > 0.0).then(|| line.at(magnitude) * x / magnitude)
    }
}

/// Which cell the magnitude is in.
pub(super) fn cell(magnitude: f64, peak: f64) -> usize {
    ((magnitude / peak * CELLS as f64) as usize).min(CELLS - 1)
}

/// The output turned back by the wanted signal's phase.
pub(super) fn turned_back(x: Complex64, y: Complex64, magnitude: f64) -> Complex64 {
    if magnitude > 0.0 {
        y * x.conj() / magnitude
    } else {
        y
    }
}

impl Scout {
    /// For wanted signals up to `peak` and outputs about `gain` times as large.
    pub fn new(peak: f64, gain: Complex64) -> Self {
        Self {
            peak,
            unscale: 1.0 / gain,
            cells: vec![Kept::default(); CELLS],
        }
    }

    /// Takes the next pairs.
    pub fn push(&mut self, wanted: &[Complex64], output: &[Complex64]) {
        for (&x, &y) in wanted.iter().zip(output) {
            let magnitude = x.norm();
            let value = turned_back(x, y * self.unscale, magnitude);
            self.cells[cell(magnitude, self.peak)].push((magnitude, value));
        }
    }

    /// The lines.
    pub fn finish(self) -> ScoutLines {
        ScoutLines {
            peak: self.peak,
            unscale: self.unscale,
            lines: self
                .cells
                .iter()
                .map(|cell| (cell.pairs.len() >= FEWEST).then(|| robust(&cell.pairs)))
                .collect(),
        }
    }
}

fn median(mut values: Vec<f64>) -> f64 {
    let middle = values.len() / 2;
    *values.select_nth_unstable_by(middle, f64::total_cmp).1
}

fn robust(pairs: &[(f64, Complex64)]) -> Line {
    let count = pairs.len() as f64;
    let mut line = Line {
        middle: pairs.iter().map(|pair| pair.0).sum::<f64>() / count,
        value: Complex64::new(
            median(pairs.iter().map(|pair| pair.1.re).collect()),
            median(pairs.iter().map(|pair| pair.1.im).collect()),
        ),
        slope: Complex64::ZERO,
        spread: 0.0,
    };
    for _ in 0..ROUNDS {
        let distance: Vec<f64> = pairs
            .iter()
            .map(|&(magnitude, value)| (value - line.at(magnitude)).norm())
            .collect();
        line.spread = median(distance.clone()) / RAYLEIGH_MEDIAN;
        let (mut w, mut wa, mut waa) = (0.0, 0.0, 0.0);
        let (mut wv, mut wav) = (Complex64::ZERO, Complex64::ZERO);
        for (&(magnitude, value), distance) in pairs.iter().zip(&distance) {
            let far = HUBER * line.spread;
            let weight = if *distance > far { far / distance } else { 1.0 };
            let a = magnitude - line.middle;
            w += weight;
            wa += weight * a;
            waa += weight * a * a;
            wv += weight * value;
            wav += weight * a * value;
        }
        if w <= 0.0 {
            break;
        }
        let across = waa - wa * wa / w;
        let slope = if across > 1e-12 * waa {
            (wav - wv * (wa / w)) / across
        } else {
            Complex64::ZERO
        };
        line.slope = slope;
        line.value = (wv - slope * wa) / w;
    }
    line
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_tenth_of_wild_pairs_does_not_move_the_line() {
        let pairs: Vec<_> = (0..2000)
            .map(|n| {
                let a = 0.5 + 1e-5 * f64::from(n % 100);
                let jitter = 1e-3 * Complex64::cis(f64::from(n * n) * 0.7);
                let wild = if n % 10 == 3 { 0.4 } else { 0.0 };
                (a, Complex64::new(2.0 * a + wild, 0.1) + jitter)
            })
            .collect();
        let line = robust(&pairs);
        // Plain least squares would be off by a tenth of 0.4.
        assert!(
            (line.at(0.5005) - Complex64::new(1.001, 0.1)).norm() < 5e-4,
            "{line:?}"
        );
        assert!(line.spread < 2e-3);
    }

    #[test]
    fn a_cell_keeps_pairs_from_all_of_the_stream() {
        let mut kept = Kept::default();
        for n in 0..100_000 {
            kept.push((f64::from(n), Complex64::ZERO));
        }
        assert!((KEPT / 2..KEPT).contains(&kept.pairs.len()));
        let last = kept.pairs[kept.pairs.len() - 1].0;
        assert!(last > 99_000.0 && kept.pairs[0].0 == 0.0);
    }
}
