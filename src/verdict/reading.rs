//! Readings of a mask: power in a bandwidth that is swept over the offset.

use crate::limits::{Detector, Placement};
use crate::metrics::Spectrum;
use crate::units::dbm_from_watt;

/// The lowest power that is told apart from none, W: keeps levels finite where a spectrum is empty.
const NOTHING_W: f64 = 1e-40;

/// How far a peak-hold spectrum's noise bandwidth may be from the one wanted, as a part of it: 5 % is
/// 0.2 dB on noise. A whole number of samples per block comes much closer at any usual rate.
const BANDWIDTH_TOLERANCE: f64 = 0.05;

/// The most centres one segment is read at; the step grows beyond.
const MOST_CENTRES: f64 = 4e6;

/// A level in dBm that is finite even for no power at all.
pub(super) fn level_dbm(watt: f64) -> f64 {
    dbm_from_watt(watt.max(NOTHING_W))
}

/// A spectrum with the running sum of its powers, so that any band is read in constant time.
///
/// Sums carry their rounding error along (Knuth's exact sum of two numbers): the difference of two
/// keeps a band's digits even where it holds 1e-15 of the power summed before it.
#[derive(Debug)]
pub(super) struct Bands<'a> {
    spectrum: &'a Spectrum,
    w_per_hz: &'a [f64],
    /// `sums[i]` is the power of all bins below bin `i`, W, with what rounding left off.
    sums: Vec<(f64, f64)>,
}

/// The rounded sum of two numbers and what rounding left off (D. E. Knuth, The Art of Computer
/// Programming, volume 2, section 4.2.2; recalled).
fn exact_sum(a: f64, b: f64) -> (f64, f64) {
    let sum = a + b;
    let part = sum - a;
    (sum, (a - (sum - part)) + (b - part))
}

impl<'a> Bands<'a> {
    /// The bands of the mean densities.
    pub(super) fn new(spectrum: &'a Spectrum) -> Self {
        Self::of(spectrum, &spectrum.mean_w_per_hz)
    }

    /// The bands of other densities of the same bins.
    fn of(spectrum: &'a Spectrum, w_per_hz: &'a [f64]) -> Self {
        let mut sums = Vec::with_capacity(w_per_hz.len() + 1);
        let (mut sum, mut left_off) = (0.0, 0.0);
        sums.push((sum, left_off));
        for density in w_per_hz {
            let (next, error) = exact_sum(sum, density * spectrum.bin_hz);
            sum = next;
            left_off += error;
            sums.push((sum, left_off));
        }
        Self {
            spectrum,
            w_per_hz,
            sums,
        }
    }

    pub(super) fn spectrum(&self) -> &'a Spectrum {
        self.spectrum
    }

    /// Power in `bandwidth_hz` around `centre_hz`, W.
    fn around_w(&self, centre_hz: f64, bandwidth_hz: f64) -> f64 {
        self.power_w(
            centre_hz - bandwidth_hz / 2.0,
            centre_hz + bandwidth_hz / 2.0,
        )
    }

    /// Power from `from_hz` to `to_hz`, W; what lies past the sampled range counts as nothing.
    pub(super) fn power_w(&self, from_hz: f64, to_hz: f64) -> f64 {
        let bins = self.w_per_hz.len();
        let (low, _) = self.spectrum.range_hz();
        let position = |hz: f64| ((hz - low) / self.spectrum.bin_hz).clamp(0.0, bins as f64);
        let (from, to) = (position(from_hz), position(to_hz));
        let (first, last) = (from as usize, to as usize);
        let part = |bin: usize, covered: f64| {
            covered * self.w_per_hz.get(bin).copied().unwrap_or(0.0) * self.spectrum.bin_hz
        };
        if first == last {
            return part(first, to - from);
        }
        // The rest of the first bin, the whole bins between, the start of the last.
        let (after, end) = (self.sums[first + 1], self.sums[last]);
        let whole = (end.0 - after.0) + (end.1 - after.1);
        part(first, first as f64 + 1.0 - from) + whole.max(0.0) + part(last, to - last as f64)
    }
}

/// One way of reading: a detector in a bandwidth.
#[derive(Debug)]
pub(super) enum Reader<'a> {
    /// Mean power in a flat filter.
    Mean {
        bands: &'a Bands<'a>,
        bandwidth_hz: f64,
    },
    /// Peak-hold readings of a narrower spectrum, summed over a flat filter.
    Summed { bands: Bands<'a>, bandwidth_hz: f64 },
    /// Peak hold in the window's own bandwidth.
    Peak {
        spectrum: &'a Spectrum,
        held: &'a [f64],
    },
}

impl<'a> Reader<'a> {
    /// The reader for `detector` in `bandwidth_hz`; none where no peak-hold spectrum has that bandwidth.
    pub(super) fn new(
        bands: &'a Bands<'a>,
        peak_hold: &'a [Spectrum],
        detector: Detector,
        (bandwidth_hz, sum_of_bw_hz): (f64, Option<f64>),
    ) -> Option<Self> {
        let held_in_hz = sum_of_bw_hz.unwrap_or(bandwidth_hz);
        match detector {
            Detector::Mean => Some(Self::Mean {
                bands,
                bandwidth_hz,
            }),
            Detector::PeakHold => peak_hold
                .iter()
                .filter_map(|spectrum| {
                    let held = spectrum.peak_w_per_hz.as_deref()?;
                    let apart = (spectrum.enbw_hz / held_in_hz - 1.0).abs();
                    (apart <= BANDWIDTH_TOLERANCE).then_some((apart, spectrum, held))
                })
                .min_by(|a, b| a.0.total_cmp(&b.0))
                .map(|(_, spectrum, held)| match sum_of_bw_hz {
                    Some(_) => Self::Summed {
                        bands: Bands::of(spectrum, held),
                        bandwidth_hz,
                    },
                    None => Self::Peak { spectrum, held },
                }),
        }
    }

    /// The lowest and highest centre that can be read, Hz from the carrier.
    pub(super) fn centres_hz(&self) -> (f64, f64) {
        match self {
            Self::Mean {
                bands: Bands { spectrum, .. },
                bandwidth_hz,
            }
            | Self::Summed {
                bands: Bands { spectrum, .. },
                bandwidth_hz,
            } => {
                let (low, high) = spectrum.range_hz();
                (low + bandwidth_hz / 2.0, high - bandwidth_hz / 2.0)
            }
            Self::Peak { spectrum, .. } => {
                let half_hz = spectrum.enbw_hz / 2.0;
                let (low, high) = spectrum.range_hz();
                (low + half_hz, high - half_hz)
            }
        }
    }

    /// How far apart centres are, Hz: a bin, but at most a quarter of the bandwidth.
    pub(super) fn step_hz(&self) -> f64 {
        match self {
            Self::Mean {
                bands: Bands { spectrum, .. },
                bandwidth_hz,
            }
            | Self::Summed {
                bands: Bands { spectrum, .. },
                bandwidth_hz,
            } => spectrum.bin_hz.min(bandwidth_hz / 4.0),
            Self::Peak { spectrum, .. } => spectrum.bin_hz,
        }
    }

    /// The reading centred on `centre_hz`, W.
    pub(super) fn power_w(&self, centre_hz: f64) -> f64 {
        match self {
            Self::Mean {
                bands,
                bandwidth_hz,
            } => bands.around_w(centre_hz, *bandwidth_hz),
            Self::Summed {
                bands,
                bandwidth_hz,
            } => bands.around_w(centre_hz, *bandwidth_hz),
            Self::Peak { spectrum, held } => {
                // Between two bins the power is taken on the straight line between theirs.
                let at = (centre_hz / spectrum.bin_hz + (spectrum.bins() / 2) as f64)
                    .clamp(0.0, spectrum.bins() as f64 - 1.0);
                let near = at.round();
                let density = |bin: usize| held.get(bin).copied().unwrap_or(0.0);
                let w_per_hz = if (at - near).abs() < 1e-6 {
                    density(near as usize)
                } else {
                    let part = at.fract();
                    (1.0 - part) * density(at as usize) + part * density(at as usize + 1)
                };
                w_per_hz * spectrum.enbw_hz
            }
        }
    }

    /// The largest reading with its centre from `from_hz` to `to_hz`, W.
    pub(super) fn largest_w(&self, from_hz: f64, to_hz: f64) -> f64 {
        self.sweep(from_hz, to_hz)
            .map(|centre_hz| self.power_w(centre_hz))
            .fold(0.0, f64::max)
    }

    /// Centres from `from_hz` to `to_hz`, both included, and between them every whole step from the
    /// carrier.
    pub(super) fn sweep(&self, from_hz: f64, to_hz: f64) -> impl Iterator<Item = f64> + use<> {
        let step_hz = self.step_hz().max((to_hz - from_hz) / MOST_CENTRES);
        let (first, last) = ((from_hz / step_hz).ceil(), (to_hz / step_hz).floor());
        let count = if last >= first {
            (last - first) as u64 + 1
        } else {
            0
        };
        std::iter::once(from_hz)
            .chain((0..count).map(move |at| (first + at as f64) * step_hz))
            .chain(std::iter::once(to_hz))
    }
}

/// The first and last centre of the measuring filter in a segment.
pub(super) fn centres(
    placement: Placement,
    from_hz: f64,
    to_hz: f64,
    bandwidth_hz: f64,
) -> (f64, f64) {
    match placement {
        Placement::Centre => (from_hz, to_hz),
        Placement::Inside if to_hz - from_hz < bandwidth_hz => {
            let middle_hz = (from_hz + to_hz) / 2.0;
            (middle_hz, middle_hz)
        }
        Placement::Inside => (from_hz + bandwidth_hz / 2.0, to_hz - bandwidth_hz / 2.0),
    }
}
