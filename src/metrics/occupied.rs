//! The band that holds a stated part of the power.

use super::spectrum::{Spectrum, SpectrumError};

/// Edges of the band that holds a part of the power, with half of the rest on each side.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct OccupiedBand {
    /// Part of the total power inside, 0 to 1.
    pub fraction: f64,
    /// Lower edge, Hz from the carrier.
    pub from_hz: f64,
    /// Upper edge, Hz from the carrier.
    pub to_hz: f64,
}

impl OccupiedBand {
    /// Width between the edges, Hz.
    pub fn width_hz(&self) -> f64 {
        self.to_hz - self.from_hz
    }
}

/// The occupied bandwidth: below its lower and above its upper edge the mean powers are each
/// `(1 - fraction) / 2` of the total (ITU Radio Regulations, 1.153, with `fraction` 0.99).
///
/// The density is taken as constant over each bin, so the edges are interpolated within a bin. The
/// window widens a line to its own width: edges are good to about one `enbw_hz`.
///
/// # Errors
/// [`SpectrumError::Fraction`], or [`SpectrumError::NoPower`] for an empty or silent spectrum.
pub fn occupied_bandwidth(
    spectrum: &Spectrum,
    fraction: f64,
) -> Result<OccupiedBand, SpectrumError> {
    if !(fraction > 0.0 && fraction < 1.0) {
        return Err(SpectrumError::Fraction { given: fraction });
    }
    let densities = &spectrum.mean_w_per_hz;
    let total: f64 = densities.iter().sum();
    if !(total > 0.0 && total.is_finite()) {
        return Err(SpectrumError::NoPower);
    }
    let outside = (1.0 - fraction) / 2.0 * total;
    let (low, high) = spectrum.range_hz();
    Ok(OccupiedBand {
        fraction,
        from_hz: low + crossing(densities.iter(), outside) * spectrum.bin_hz,
        to_hz: high - crossing(densities.iter().rev(), outside) * spectrum.bin_hz,
    })
}

/// Bins from the start at which the running sum reaches `level`.
fn crossing<'a>(densities: impl Iterator<Item = &'a f64>, level: f64) -> f64 {
    let mut sum = 0.0;
    let mut bins = 0.0;
    for density in densities {
        if sum + density >= level && *density > 0.0 {
            return bins + (level - sum) / density;
        }
        sum += density;
        bins += 1.0;
    }
    bins
}

#[cfg(test)]
mod tests {
    use super::*;

    fn spectrum(mean_w_per_hz: Vec<f64>) -> Spectrum {
        Spectrum {
            bin_hz: 2.0,
            enbw_hz: 3.0,
            mean_w_per_hz,
            peak_w_per_hz: None,
            segments: 1,
        }
    }

    #[test]
    fn a_flat_spectrum_is_occupied_by_the_fraction() {
        let band = occupied_bandwidth(&spectrum(vec![0.7; 101]), 0.99);
        let band = band.unwrap_or_else(|error| panic!("{error}"));
        assert!((band.width_hz() - 0.99 * 202.0).abs() < 1e-9);
        assert!((band.from_hz + band.to_hz).abs() < 1e-9);
    }

    #[test]
    fn an_edge_lies_within_its_bin() {
        // Total 10, 10 % outside: 0.5 on each side. Below: 0.5 / 4 of the bin from -3 Hz on. Above:
        // half of the bin that ends at 3 Hz.
        let band = occupied_bandwidth(&spectrum(vec![4.0, 5.0, 1.0]), 0.9);
        let band = band.unwrap_or_else(|error| panic!("{error}"));
        assert!((band.from_hz - -2.75).abs() < 1e-12);
        assert!((band.to_hz - 2.0).abs() < 1e-12);
    }

    #[test]
    fn silence_and_bad_fractions_are_refused() {
        let empty = spectrum(vec![0.0; 8]);
        assert_eq!(
            occupied_bandwidth(&empty, 0.99),
            Err(SpectrumError::NoPower)
        );
        for fraction in [0.0, 1.0, -1.0, f64::NAN] {
            assert!(occupied_bandwidth(&spectrum(vec![1.0; 8]), fraction).is_err());
        }
    }
}
