//! Mean and peak power of a stream, and how often its power rises above the mean.

use num_complex::Complex64;

use crate::units::db;

/// Cells to each doubling of power. The cells of one doubling are equally wide in power, so a cell is
/// 0.0042 to 0.0085 dB wide: always finer than 0.01 dB.
const CELLS: usize = 1 << CELL_BITS;
const CELL_BITS: u32 = 9;
/// Doublings counted, centred on `|x|^2 = 1`: -210 dB to 210 dB. Beyond, the outermost cells count.
const DOUBLINGS: usize = 140;
const LOWEST_EXPONENT: usize = 1023 - DOUBLINGS / 2;

/// Counts the powers of a stream's samples on a logarithmic grid finer than 0.01 dB.
#[derive(Debug, Clone)]
pub struct EnvelopeMeter {
    load_ohm: f64,
    counts: Vec<u64>,
    samples: u64,
    sum: f64,
    peak: f64,
}

/// Powers of a stream and their distribution.
#[derive(Debug, Clone, PartialEq)]
pub struct EnvelopeFigures {
    /// Mean power, W.
    pub mean_w: f64,
    /// Peak envelope power: the largest `|x|^2 / (2 R)` of all samples, W. Between samples it may
    /// be higher where the rate is low.
    pub peak_w: f64,
    /// Peak over mean, dB.
    pub papr_db: f64,
    /// Samples counted.
    pub samples: u64,
    mean_square: f64,
    /// Samples in cells above each cell's upper edge, by cell.
    above: Vec<u64>,
    /// First cell of `above`.
    first: usize,
}

impl EnvelopeMeter {
    /// A meter of peak phasors (V) over `load_ohm`.
    pub fn new(load_ohm: f64) -> Self {
        Self {
            load_ohm,
            counts: vec![0; DOUBLINGS * CELLS],
            samples: 0,
            sum: 0.0,
            peak: 0.0,
        }
    }

    /// Takes the next samples of the stream.
    pub fn push(&mut self, samples: &[Complex64]) {
        let mut sum = 0.0;
        let mut peak = self.peak;
        for sample in samples {
            let square = sample.norm_sqr();
            sum += square;
            peak = peak.max(square);
            self.counts[cell(square)] += 1;
        }
        self.sum += sum;
        self.peak = peak;
        self.samples += samples.len() as u64;
    }

    /// The figures of all samples so far; `None` without a sample or without any power.
    pub fn finish(self) -> Option<EnvelopeFigures> {
        if self.samples == 0 || self.sum <= 0.0 {
            return None;
        }
        let first = self.counts.iter().position(|&count| count > 0)?;
        let last = self.counts.iter().rposition(|&count| count > 0)?;
        let mut above = vec![0; last + 1 - first];
        let mut sum = 0;
        for cell in (first..=last).rev() {
            above[cell - first] = sum;
            sum += self.counts[cell];
        }
        let mean_square = self.sum / self.samples as f64;
        Some(EnvelopeFigures {
            mean_w: mean_square / (2.0 * self.load_ohm),
            peak_w: self.peak / (2.0 * self.load_ohm),
            papr_db: db(self.peak / mean_square),
            samples: self.samples,
            mean_square,
            above,
            first,
        })
    }
}

impl EnvelopeFigures {
    /// CCDF: the probability that the power lies more than `above_mean_db` above the mean.
    ///
    /// Within a cell (at most 0.0085 dB) the samples are taken as evenly spread.
    pub fn ccdf(&self, above_mean_db: f64) -> f64 {
        let square = self.mean_square * crate::units::from_db(above_mean_db);
        if above_mean_db >= self.papr_db {
            return 0.0;
        }
        let at = cell(square);
        if at < self.first {
            return 1.0;
        }
        let index = (at - self.first).min(self.above.len() - 1);
        let (low, high) = (edge(at), edge(at + 1));
        let inside = self.inside(index) as f64 * ((high - square) / (high - low)).clamp(0.0, 1.0);
        (self.above[index] as f64 + inside) / self.samples as f64
    }

    /// The level, dB above the mean, that the power exceeds with `probability`: the inverse of
    /// [`ccdf`](Self::ccdf), held to the peak. `None` outside 0 to 1.
    pub fn quantile_db(&self, probability: f64) -> Option<f64> {
        if !(0.0..=1.0).contains(&probability) {
            return None;
        }
        let wanted = probability * self.samples as f64;
        // `above` falls with the cell: the first cell with no more than `wanted` above it.
        let index = self.above.partition_point(|&above| above as f64 > wanted);
        let inside = self.inside(index).max(1) as f64;
        let part = ((wanted - self.above[index] as f64) / inside).clamp(0.0, 1.0);
        let (low, high) = (edge(self.first + index), edge(self.first + index + 1));
        let square = high - part * (high - low);
        Some(db(square / self.mean_square).min(self.papr_db))
    }

    /// Points of the CCDF every `step_db` from the mean to the peak: (dB above the mean, probability).
    pub fn ccdf_points(&self, step_db: f64) -> Vec<(f64, f64)> {
        // A ten-thousandth of a decibel is finer than the count: it bounds the number of points.
        let step_db = if step_db.is_finite() {
            step_db.max(1e-4)
        } else {
            1.0
        };
        let steps = (self.papr_db.max(0.0) / step_db) as usize;
        (0..=steps)
            .map(|step| {
                let level_db = step as f64 * step_db;
                (level_db, self.ccdf(level_db))
            })
            .collect()
    }

    /// Samples in cell `index`.
    fn inside(&self, index: usize) -> u64 {
        let with = match index {
            0 => self.samples,
            _ => self.above[index - 1],
        };
        with - self.above[index]
    }
}

/// The cell of a power: the exponent and the leading bits of the mantissa as they stand in the number.
fn cell(square: f64) -> usize {
    let leading = (square.to_bits() >> (52 - CELL_BITS)) as usize;
    leading
        .saturating_sub(LOWEST_EXPONENT << CELL_BITS)
        .min(DOUBLINGS * CELLS - 1)
}

/// The lower edge of a cell.
fn edge(cell: usize) -> f64 {
    f64::from_bits(((cell + (LOWEST_EXPONENT << CELL_BITS)) as u64) << (52 - CELL_BITS))
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn figures(samples: &[Complex64]) -> EnvelopeFigures {
        let mut meter = EnvelopeMeter::new(50.0);
        meter.push(samples);
        meter.finish().unwrap_or_else(|| panic!("no power"))
    }

    #[test]
    fn a_carrier_is_all_mean() {
        let figures = figures(&[Complex64::new(6.0, 8.0); 10]);
        assert_eq!((figures.mean_w, figures.peak_w), (1.0, 1.0));
        assert_eq!(figures.papr_db, 0.0);
        assert_eq!(figures.ccdf(0.0), 0.0);
        assert_eq!(figures.ccdf(-0.1), 1.0);
    }

    #[test]
    fn exponential_powers_follow_their_law() {
        // Powers at the mid-quantiles of the exponential law: its CCDF is exp(-level / mean), to
        // half a sample in 100 000, and to the spread within one cell (0.01 dB: 0.0023 level exp(-level)).
        let count = 100_000;
        let samples: Vec<_> = (0..count)
            .map(|i| Complex64::from((-((i as f64 + 0.5) / count as f64).ln()).sqrt()))
            .collect();
        let figures = figures(&samples);
        for level_db in [-20.0, -3.0, 0.0, 3.0, 6.0, 9.0] {
            let level = 10_f64.powf(level_db / 10.0);
            let law = (-level).exp();
            assert!((figures.ccdf(level_db) - law).abs() < 2e-5, "{level_db}");
            let back = figures.quantile_db(law).unwrap_or(f64::NAN);
            assert!((back - level_db).abs() < 0.01, "{level_db} {back}");
        }
    }

    #[test]
    fn silence_has_no_figures() {
        let mut meter = EnvelopeMeter::new(50.0);
        assert!(meter.clone().finish().is_none());
        meter.push(&[Complex64::ZERO; 5]);
        assert!(meter.finish().is_none());
    }

    proptest! {
        #[test]
        fn the_count_is_the_sorted_list(
            levels in prop::collection::vec(-60.0_f64..20.0, 1..300), at in -60.0..20.0,
        ) {
            let samples: Vec<_> =
                levels.iter().map(|db| Complex64::from(10_f64.powf(db / 20.0))).collect();
            let figures = figures(&samples);
            let mean_db = 10.0 * figures.mean_square.log10();
            // Levels within a cell of the threshold may fall on either side.
            let sure = levels.iter().filter(|&&level| level > at + 0.01).count() as f64;
            let may = levels.iter().filter(|&&level| level > at - 0.01).count() as f64;
            let counted = figures.ccdf(at - mean_db) * levels.len() as f64;
            prop_assert!(sure - 1e-6 <= counted && counted <= may + 1e-6);
        }

        #[test]
        fn cells_are_finer_than_a_hundredth_of_a_decibel(level_db in -200.0_f64..200.0) {
            let square = 10_f64.powf(level_db / 10.0);
            let at = cell(square);
            prop_assert!(edge(at) <= square && square < edge(at + 1));
            prop_assert!(10.0 * (edge(at + 1) / edge(at)).log10() < 0.01);
        }
    }
}
