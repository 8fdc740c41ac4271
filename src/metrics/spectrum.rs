//! An averaged power spectrum and the powers that can be read off it.

/// Why a number cannot be read off a spectrum.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum SpectrumError {
    /// The band reaches past the sampled range.
    #[error(
        "the band {from_hz} Hz to {to_hz} Hz reaches past the sampled range of +/-{limit_hz} Hz: raise the sample rate"
    )]
    OutOfRange {
        /// Lower edge asked for, Hz from the carrier.
        from_hz: f64,
        /// Upper edge asked for, Hz from the carrier.
        to_hz: f64,
        /// Highest offset that was sampled, Hz.
        limit_hz: f64,
    },
    /// Fewer samples than one segment.
    #[error("{given} samples are too few for one spectrum of {needed} samples at this resolution")]
    TooShort {
        /// Samples that came.
        given: u64,
        /// Samples of one segment.
        needed: usize,
    },
    /// A sample rate that is none.
    #[error("a sample rate of {given_hz} Hz: it must be positive and finite")]
    Rate {
        /// Rate given, Hz.
        given_hz: f64,
    },
    /// A load that takes no power.
    #[error("a load of {given_ohm} ohm: it must be positive and finite")]
    Load {
        /// Load given, ohm.
        given_ohm: f64,
    },
    /// A resolution that no block of a sensible length has.
    #[error(
        "a resolution bandwidth of {given_hz} Hz: from {finest_hz} Hz to {coarsest_hz} Hz is possible at this sample rate and window"
    )]
    Resolution {
        /// Resolution given, Hz.
        given_hz: f64,
        /// Smallest possible, Hz.
        finest_hz: f64,
        /// Largest possible, Hz.
        coarsest_hz: f64,
    },
    /// A block too short or too long to transform.
    #[error("blocks of {given} samples: {shortest} to {longest} are possible")]
    Length {
        /// Length given.
        given: usize,
        /// Shortest possible.
        shortest: usize,
        /// Longest possible.
        longest: usize,
    },
    /// Blocks that overlap wholly or not at all.
    #[error("an overlap of {given}: it must be from 0 to below 1")]
    Overlap {
        /// Overlap given, as a part of a block.
        given: f64,
    },
    /// A window parameter without meaning.
    #[error("a Kaiser window with beta {beta}: it must be from 0 to 50")]
    Window {
        /// Parameter given.
        beta: f64,
    },
    /// A part of the power that is none.
    #[error("a fraction of {given} of the power: it must lie between 0 and 1")]
    Fraction {
        /// Fraction given.
        given: f64,
    },
    /// Nothing to take a part of.
    #[error("the spectrum holds no power")]
    NoPower,
}

/// Two-sided power densities over the offset from the carrier, lowest offset first.
///
/// Bin `i` is centred on `(i - bins / 2) * bin_hz` (integer division), so offset 0 is always a bin centre.
#[derive(Debug, Clone, PartialEq)]
pub struct Spectrum {
    /// Distance between bins, Hz.
    pub bin_hz: f64,
    /// Equivalent noise bandwidth of the window, Hz: the resolution bandwidth of one bin's reading.
    pub enbw_hz: f64,
    /// Mean over all segments, W/Hz.
    pub mean_w_per_hz: Vec<f64>,
    /// Largest of all segments bin by bin, W/Hz in `enbw_hz`: a peak-hold reading in that resolution.
    /// Absent where it was not asked for.
    pub peak_w_per_hz: Option<Vec<f64>>,
    /// Segments averaged.
    pub segments: u64,
}

impl Spectrum {
    /// Number of bins.
    pub fn bins(&self) -> usize {
        self.mean_w_per_hz.len()
    }

    /// Centre of bin `bin`, Hz from the carrier.
    pub fn offset_hz(&self, bin: usize) -> f64 {
        (bin as f64 - (self.bins() / 2) as f64) * self.bin_hz
    }

    /// The range over which powers can be read: all bins with their full widths, Hz from the carrier.
    pub fn range_hz(&self) -> (f64, f64) {
        (
            self.offset_hz(0) - self.bin_hz / 2.0,
            self.offset_hz(self.bins() - 1) + self.bin_hz / 2.0,
        )
    }

    /// The same without the bins whose centres lie farther than `until_hz` from the carrier.
    #[must_use]
    pub fn within(&self, until_hz: f64) -> Self {
        let side = (until_hz / self.bin_hz).max(0.0).floor();
        if side >= (self.bins() / 2) as f64 {
            return self.clone();
        }
        let (side, centre) = (side as usize, self.bins() / 2);
        // An odd number of bins keeps the carrier in the middle one; the highest bin may be missing.
        let inside = centre - side..(centre + side + 1).min(self.bins());
        Self {
            mean_w_per_hz: self.mean_w_per_hz[inside.clone()].to_vec(),
            peak_w_per_hz: self
                .peak_w_per_hz
                .as_ref()
                .map(|densities| densities[inside.clone()].to_vec()),
            ..*self
        }
    }

    /// Total mean power, W.
    pub fn total_w(&self) -> f64 {
        self.mean_w_per_hz.iter().sum::<f64>() * self.bin_hz
    }

    /// Mean power from `from_hz` to `to_hz`, W; the bins at the edges count by the part covered.
    ///
    /// # Errors
    /// [`SpectrumError::OutOfRange`].
    pub fn power_w(&self, from_hz: f64, to_hz: f64) -> Result<f64, SpectrumError> {
        self.weighted_w(from_hz, to_hz, |_| 1.0)
    }

    /// Mean power from `from_hz` to `to_hz` with each bin weighted by `weight` (a power ratio) at its centre, W.
    ///
    /// # Errors
    /// [`SpectrumError::OutOfRange`].
    pub fn weighted_w(
        &self,
        from_hz: f64,
        to_hz: f64,
        weight: impl Fn(f64) -> f64,
    ) -> Result<f64, SpectrumError> {
        let (low, high) = self.range_hz();
        // A millionth of a bin forgives rounding of offsets that meet the range exactly.
        let slack = 1e-6 * self.bin_hz;
        if from_hz < low - slack || to_hz > high + slack {
            return Err(SpectrumError::OutOfRange {
                from_hz,
                to_hz,
                limit_hz: high,
            });
        }
        let position = |hz: f64| ((hz - low) / self.bin_hz).clamp(0.0, self.bins() as f64);
        let (from, to) = (position(from_hz), position(to_hz));
        let mut sum = 0.0;
        for bin in from as usize..(to.ceil() as usize).min(self.bins()) {
            let covered = to.min(bin as f64 + 1.0) - from.max(bin as f64);
            sum += covered.max(0.0) * self.mean_w_per_hz[bin] * weight(self.offset_hz(bin));
        }
        Ok(sum * self.bin_hz)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn cut_spectra_keep_offsets_and_densities() {
        for bins in [8usize, 9] {
            let spectrum = Spectrum {
                bin_hz: 10.0,
                enbw_hz: 15.0,
                mean_w_per_hz: (0..bins).map(|bin| bin as f64).collect(),
                peak_w_per_hz: Some((0..bins).map(|bin| 2.0 * bin as f64).collect()),
                segments: 3,
            };
            let cut = spectrum.within(25.0);
            assert_eq!(cut.bins(), 5);
            let shift = bins / 2 - 2;
            for bin in 0..5 {
                assert_eq!(cut.offset_hz(bin), spectrum.offset_hz(bin + shift));
                assert_eq!(cut.mean_w_per_hz[bin], (bin + shift) as f64);
            }
            assert_eq!(cut.peak_w_per_hz.unwrap()[0], 2.0 * shift as f64);
            assert_eq!(spectrum.within(f64::INFINITY), spectrum);
            assert_eq!(spectrum.within(1000.0), spectrum);
        }
    }
}
