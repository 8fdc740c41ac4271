//! Where two spectra part.

use crate::metrics::Spectrum;
use crate::units::{db, dbm_from_watt};

/// Bands over the whole range; odd, so that one lies at the carrier.
const BANDS: usize = 41;

/// The part of the sampled range that counts to each side: beyond it the replay's filter takes off.
const RANGE: f64 = 0.8;

/// A difference that counts as parting, dB.
pub const PARTED_DB: f64 = 1.0;

/// Bands below this part of the whole power in both spectra are left out, dB.
const FLOOR_DB: f64 = -110.0;

/// Power in a band of both spectra.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Band {
    /// Lower border, Hz from the carrier.
    pub from_hz: f64,
    /// Upper border, Hz from the carrier.
    pub to_hz: f64,
    /// By map.
    pub map_dbm: f64,
    /// By replay.
    pub replay_dbm: f64,
}

impl Band {
    /// Replay over map, dB.
    pub fn difference_db(&self) -> f64 {
        self.replay_dbm - self.map_dbm
    }
}

/// Two spectra band by band.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Parting {
    /// From the lowest to the highest offset.
    pub bands: Vec<Band>,
    /// The smallest distance from the carrier at which a band differs by more than 1 dB; absent where none does.
    pub from_hz: Option<f64>,
    /// The band that differs most, of those above -110 dB of the whole power.
    pub widest: Option<Band>,
}

impl Parting {
    /// Of two spectra over the same bins.
    pub fn of(map: &Spectrum, replay: &Spectrum) -> Self {
        let reach = RANGE * replay.range_hz().1.min(map.range_hz().1);
        let width = 2.0 * reach / BANDS as f64;
        let total_w = replay.total_w().max(map.total_w());
        let mut parting = Self {
            bands: Vec::new(),
            from_hz: None,
            widest: None,
        };
        for at in 0..BANDS {
            let from_hz = -reach + at as f64 * width;
            let to_hz = from_hz + width;
            let (Ok(by_map), Ok(by_replay)) =
                (map.power_w(from_hz, to_hz), replay.power_w(from_hz, to_hz))
            else {
                continue;
            };
            let band = Band {
                from_hz,
                to_hz,
                map_dbm: dbm_from_watt(by_map),
                replay_dbm: dbm_from_watt(by_replay),
            };
            parting.bands.push(band);
            let difference = band.difference_db().abs();
            if db(by_map.max(by_replay) / total_w) < FLOOR_DB || !difference.is_finite() {
                continue;
            }
            let widest = parting
                .widest
                .map_or(0.0, |band| band.difference_db().abs());
            if difference > widest {
                parting.widest = Some(band);
            }
            let distance = if from_hz * to_hz <= 0.0 {
                0.0
            } else {
                from_hz.abs().min(to_hz.abs())
            };
            if difference > PARTED_DB {
                let nearest = parting.from_hz.unwrap_or(f64::INFINITY);
                parting.from_hz = Some(nearest.min(distance));
            }
        }
        parting
    }
}
