//! What relative levels count from.

use super::judge::Measured;
use super::reading::{Bands, Reader, level_dbm};
use crate::limits::{Conditions, Reference};

/// Half the stretch around the carrier in which a near-carrier average is looked for, Hz.
const NEAR_CARRIER_HZ: f64 = 1e6;

/// Half of the 30 kHz on the carrier, Hz.
const HALF_ON_CARRIER_HZ: f64 = 15e3;

/// The level of a reference, and what stood for it where the rule's own was not to be had.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Level {
    pub dbm: f64,
    pub words: String,
}

/// Settles `reference` for readings by `reader`.
pub(super) fn level(
    reference: Reference,
    reader: &Reader<'_>,
    bands: &Bands<'_>,
    measured: &Measured<'_>,
    conditions: &Conditions,
    carrier_w: Option<f64>,
) -> Level {
    let plain = |watt: f64| Level {
        dbm: level_dbm(watt),
        words: reference.words().to_owned(),
    };
    // The total power in the channel; of all that was sampled where no width is stated.
    let in_channel = || {
        conditions
            .channel_hz
            .or(conditions.authorized_bandwidth_hz)
            .map_or(measured.mean_w, |width_hz| {
                bands.power_w(-width_hz / 2.0, width_hz / 2.0)
            })
    };
    let (low, high) = reader.centres_hz();
    match reference {
        Reference::OutputPower | Reference::MeanPower => plain(measured.mean_w),
        Reference::UnmodulatedCarrierPower => match carrier_w {
            Some(carrier_w) => plain(carrier_w),
            None => Level {
                dbm: level_dbm(in_channel()),
                words: "the mean power in the channel (no carrier_power is stated)".to_owned(),
            },
        },
        Reference::MeanPowerInChannel => plain(in_channel()),
        Reference::PeakOfHighestEmissionInAuthorizedBandwidth => plain(measured.peak_w),
        Reference::PeakPsdInChannel => {
            let half_hz = conditions
                .channel_hz
                .map_or(f64::INFINITY, |channel_hz| channel_hz / 2.0);
            plain(reader.largest_w(low.max(-half_hz), high.min(half_hz)))
        }
        Reference::PeakAveragePsdWithin1MhzOfCarrier => {
            plain(reader.largest_w(low.max(-NEAR_CARRIER_HZ), high.min(NEAR_CARRIER_HZ)))
        }
        Reference::PowerIn30KhzOnCarrier => {
            plain(bands.power_w(-HALF_ON_CARRIER_HZ, HALF_ON_CARRIER_HZ))
        }
        Reference::AbsoluteDbm => plain(measured.mean_w),
    }
}
