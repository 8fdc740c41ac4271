//! How a spectrum is to be taken, as plain data that can be looked at before any sample is read.

use super::spectrum::SpectrumError;
use crate::math::Window;
use crate::math::fft::fast_length;

/// Shortest and longest block of one transform: the longest takes a meter to about 150 MB.
const LENGTHS: std::ops::RangeInclusive<usize> = 16..=1 << 21;

/// What is kept of the blocks beside their mean.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Hold {
    /// Nothing.
    None,
    /// The largest of all blocks, bin by bin.
    Peak,
}

/// Blocks, window and overlap of an averaged spectrum.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct SpectrumPlan {
    /// Samples of one block, which is also the number of bins.
    pub length: usize,
    /// Window over each block.
    pub window: Window,
    /// Part of a block that the next one shares, 0 to below 1.
    pub overlap: f64,
    /// What is kept beside the mean.
    pub hold: Hold,
}

impl SpectrumPlan {
    /// A plan whose window has a noise bandwidth of `resolution_hz` at a rate of `rate_hz`.
    ///
    /// With [`Hold::Peak`] the bandwidth is the resolution, as near as a whole number of samples
    /// comes (a peak reading depends on it). With [`Hold::None`] it is at most the resolution: a mean
    /// density does not depend on it, and the length is rounded up to one that transforms fast.
    /// The overlap is [`Window::usual_overlap`].
    ///
    /// # Errors
    /// [`SpectrumError::Rate`], [`SpectrumError::Resolution`], [`SpectrumError::Window`].
    pub fn for_resolution(
        rate_hz: f64,
        resolution_hz: f64,
        window: Window,
        hold: Hold,
    ) -> Result<Self, SpectrumError> {
        check_rate(rate_hz)?;
        check_window(window)?;
        let wanted = rate_hz * window.enbw_bins() / resolution_hz;
        let longest = *LENGTHS.end();
        let shortest = *LENGTHS.start();
        let refused = SpectrumError::Resolution {
            given_hz: resolution_hz,
            finest_hz: rate_hz * window.enbw_bins() / longest as f64,
            coarsest_hz: rate_hz * window.enbw_bins() / shortest as f64,
        };
        if !(resolution_hz > 0.0 && wanted.is_finite() && wanted <= longest as f64) {
            return Err(refused);
        }
        let length = match hold {
            Hold::Peak if wanted.round() < shortest as f64 => return Err(refused),
            Hold::Peak => wanted.round() as usize,
            // A billionth forgives the rounding of a quotient that is meant to be whole.
            Hold::None => fast_length(((wanted * (1.0 - 1e-9)).ceil() as usize).max(shortest)),
        };
        Ok(Self {
            length,
            window,
            overlap: window.usual_overlap(),
            hold,
        })
    }

    /// Samples from the start of one block to the start of the next.
    pub fn hop(&self) -> usize {
        let hop = (self.length as f64 * (1.0 - self.overlap)).round() as usize;
        hop.clamp(1, self.length.max(1))
    }

    /// Refuses what no spectrum can be taken with.
    pub(super) fn check(&self, rate_hz: f64) -> Result<(), SpectrumError> {
        check_rate(rate_hz)?;
        check_window(self.window)?;
        if !LENGTHS.contains(&self.length) {
            return Err(SpectrumError::Length {
                given: self.length,
                shortest: *LENGTHS.start(),
                longest: *LENGTHS.end(),
            });
        }
        if !(0.0..1.0).contains(&self.overlap) {
            return Err(SpectrumError::Overlap {
                given: self.overlap,
            });
        }
        Ok(())
    }
}

fn check_rate(rate_hz: f64) -> Result<(), SpectrumError> {
    if rate_hz > 0.0 && rate_hz.is_finite() {
        Ok(())
    } else {
        Err(SpectrumError::Rate { given_hz: rate_hz })
    }
}

fn check_window(window: Window) -> Result<(), SpectrumError> {
    match window {
        Window::Kaiser(beta) if !(0.0..=50.0).contains(&beta) => {
            Err(SpectrumError::Window { beta })
        }
        _ => Ok(()),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_peak_reading_has_the_resolution_itself() {
        let plan = SpectrumPlan::for_resolution(48e3, 100.0, Window::FlatTop, Hold::Peak);
        // 48000 * 3.8832 / 100 = 1863.9
        assert_eq!(plan.map(|plan| plan.length), Ok(1864));
    }

    #[test]
    fn a_mean_may_be_finer_but_not_coarser() {
        for resolution_hz in [3.0, 37.0, 100.0, 299.0, 1e3] {
            let plan = SpectrumPlan::for_resolution(48e3, resolution_hz, Window::Hann, Hold::None)
                .unwrap_or_else(|error| panic!("{error}"));
            let enbw_hz = 48e3 / plan.length as f64 * 1.5;
            assert!(enbw_hz <= resolution_hz * (1.0 + 1e-9));
            assert!(enbw_hz > 0.8 * resolution_hz);
        }
        let exact = SpectrumPlan::for_resolution(48e3, 72.0, Window::Hann, Hold::None);
        assert_eq!(exact.map(|plan| plan.length), Ok(1000));
    }

    #[test]
    fn what_cannot_be_is_refused() {
        let plan = |rate, resolution, window, hold| {
            SpectrumPlan::for_resolution(rate, resolution, window, hold)
        };
        use Window::{Hann, Kaiser};
        for (rate, resolution, window) in [
            (0.0, 1.0, Hann),
            (f64::NAN, 1.0, Hann),
            (1e9, 1e-3, Hann),
            (1e3, 0.0, Hann),
            (1e3, f64::NAN, Hann),
            (1e3, 10.0, Kaiser(-1.0)),
            (1e3, 10.0, Kaiser(f64::INFINITY)),
        ] {
            assert!(plan(rate, resolution, window, Hold::None).is_err());
        }
        assert!(plan(1e3, 500.0, Hann, Hold::Peak).is_err());
        assert!(plan(1e3, 500.0, Hann, Hold::None).is_ok());
    }
}
