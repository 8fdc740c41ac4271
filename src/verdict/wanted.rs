//! Which spectra the limits need, before any is made.

use serde::Serialize;

use crate::limits::{Conditions, Corner, Detector, Kind, Limits, Mask, Placement};
use crate::metrics::ChannelFilter;

/// A segment whose rule fixes no bandwidth is read in this part of the authorized bandwidth (or the
/// channel): 1 % of the emission's width is common practice for close-in masks.
const DEFAULT_PART: f64 = 0.01;

/// Where neither width is known, Hz: common practice for 25 kHz channels.
const DEFAULT_RESOLUTION_HZ: f64 = 300.0;

/// Bins of the fine spectrum in one measuring bandwidth of a mask: a flat filter with edges of a bin.
const BINS_PER_BANDWIDTH: f64 = 4.0;

/// Bins of the fine spectrum in one channel filter: its edges stand in steep skirts.
const BINS_PER_CHANNEL: f64 = 100.0;

/// How far an open-ended segment is looked at, as a multiple of its start.
const OPEN_STRETCH: f64 = 1.25;

/// The spectra that limits need.
#[derive(Debug, Clone, PartialEq, Default, Serialize)]
pub struct Wanted {
    /// Noise bandwidth of the averaged spectrum, Hz, at most; none where no limit reads one.
    pub fine_resolution_hz: Option<f64>,
    /// Noise bandwidths of peak-hold spectra, Hz, ascending, each once. The flat-top window suits them:
    /// it reads a tone anywhere to 0.01 dB, and needs the lowest rate for a wide bandwidth.
    pub peak_hold_resolutions_hz: Vec<f64>,
    /// The whole sampled range from lowest to highest offset, Hz, at least, so that nothing is left
    /// undecided; 0 where no limit reads a spectrum.
    pub span_hz: f64,
}

/// The bandwidth in which a segment is read whose rule fixes none, Hz.
pub fn default_resolution_hz(conditions: &Conditions) -> f64 {
    conditions
        .authorized_bandwidth_hz
        .or(conditions.channel_hz)
        .map_or(DEFAULT_RESOLUTION_HZ, |width_hz| DEFAULT_PART * width_hz)
}

/// The bandwidth in which a segment that states `bw_hz` is read, Hz.
pub(super) fn bandwidth_hz(bw_hz: f64, conditions: &Conditions) -> f64 {
    if bw_hz > 0.0 {
        bw_hz
    } else {
        default_resolution_hz(conditions)
    }
}

/// The conditions that `limits` states.
pub(super) fn conditions(limits: &Limits) -> Conditions {
    Conditions {
        channel_hz: limits.channel_hz,
        authorized_bandwidth_hz: limits.authorized_bandwidth_hz,
        ..Conditions::default()
    }
}

impl Wanted {
    /// The spectra that `limits` need. Segments that need a condition nobody stated are left out.
    pub fn of(limits: &Limits) -> Self {
        let mut wanted = Self::default();
        let conditions = conditions(limits);
        for set in &limits.sets {
            match &set.kind {
                Kind::Mask(mask) => wanted.mask(mask, &mask.with_own(&conditions)),
                Kind::Adjacent(adjacent) => {
                    for row in &adjacent.rows {
                        let for_other = row.channel_hz.is_some_and(|width| {
                            limits
                                .channel_hz
                                .is_some_and(|stated| (stated / width - 1.0).abs() > 1e-6)
                        });
                        if !for_other {
                            wanted.channel(row.offset_hz, &row.filter);
                        }
                    }
                }
                Kind::Modulation(_) | Kind::Spurious(_) | Kind::Signal(_) => {}
            }
        }
        for row in &limits.acpr {
            wanted.channel(row.offset_hz, &row.filter);
        }
        wanted.peak_hold_resolutions_hz.sort_by(f64::total_cmp);
        wanted.peak_hold_resolutions_hz.dedup();
        wanted
    }

    fn fine(&mut self, resolution_hz: f64) {
        self.fine_resolution_hz = Some(
            self.fine_resolution_hz
                .map_or(resolution_hz, |other| other.min(resolution_hz)),
        );
    }

    fn reach(&mut self, highest_hz: f64) {
        self.span_hz = self.span_hz.max(2.0 * highest_hz);
    }

    fn channel(&mut self, offset_hz: f64, filter: &ChannelFilter) {
        self.fine(filter.bandwidth_hz() / BINS_PER_CHANNEL);
        self.reach(offset_hz + filter.span_hz() / 2.0);
    }

    fn mask(&mut self, mask: &Mask, conditions: &Conditions) {
        let Ok(origin_hz) = mask.origin_hz(conditions) else {
            return;
        };
        for segment in &mask.segments {
            let Ok((from_hz, to_hz)) = segment.ends_hz(conditions) else {
                continue;
            };
            let bandwidth_hz = bandwidth_hz(segment.bw_hz, conditions);
            match mask.detector {
                Detector::Mean => self.fine(bandwidth_hz / BINS_PER_BANDWIDTH),
                Detector::PeakHold => {
                    let held_hz = segment.sum_of_bw_hz.unwrap_or(bandwidth_hz);
                    self.peak_hold_resolutions_hz.push(held_hz);
                    // The channel's power and the picture are read off the mean spectrum.
                    self.fine(held_hz);
                }
            }
            let inside = match segment.placement {
                Placement::Centre => bandwidth_hz / 2.0,
                Placement::Inside => 0.0,
            };
            // One bin more than the last reading: the bins at the two ends differ by one.
            let spare = bandwidth_hz / 2.0;
            match segment.to {
                Some(Corner::Hz(_) | Corner::Fraction(_)) => {
                    self.reach(origin_hz + to_hz + inside + spare);
                }
                None => self.reach(origin_hz + OPEN_STRETCH * from_hz + 1.5 * bandwidth_hz + spare),
            }
        }
    }
}
