//! Both streams of a signal that is short enough, kept from the first pass for the second.

use num_complex::Complex64;

use super::result::Notch;

/// Instants kept at most: 128 MB.
pub(super) const MOST: u64 = 1 << 21;

/// Outputs of a replay kept at most, where not everything is: 128 MB. Longer ones are replayed again.
pub(super) const MOST_REPLAYED: u64 = 1 << 23;

/// What the second pass needs of every instant that counts.
#[derive(Debug, Default)]
pub(super) struct Kept {
    /// Index of the first instant since the start of the chain.
    pub first: u64,
    pub wanted: Vec<Complex64>,
    pub output_v: Vec<Complex64>,
    /// What the map makes of the same track, beside a replay; else empty.
    pub by_map_v: Vec<Complex64>,
    pub asked: Vec<f64>,
    pub control: Vec<f64>,
}

/// The stretch of time around the deepest notch that is shown.
#[derive(Debug, Clone, Copy)]
pub(super) struct NotchWindow {
    /// Its middle, counted from the start of the chain.
    pub middle: u64,
    /// Instants to each side.
    pub reach: u64,
    pub rate_hz: f64,
    pub level: f64,
    /// Full range of the control.
    pub full: f64,
}

impl NotchWindow {
    /// Adds the instants of a piece that starts at `first` and fall into the stretch.
    pub fn take(
        &self,
        first: u64,
        wanted: &[Complex64],
        asked: &[f64],
        control: &[f64],
        notch: &mut Notch,
    ) {
        let start = self.middle.saturating_sub(self.reach).saturating_sub(first);
        let end = (self.middle + self.reach + 1).saturating_sub(first);
        let inside = start.min(wanted.len() as u64) as usize..end.min(wanted.len() as u64) as usize;
        for at in inside {
            let offset = (first + at as u64) as f64 - self.middle as f64;
            notch.time_s.push(offset / self.rate_hz);
            notch.wanted.push(self.level * wanted[at].norm());
            notch.asked.push(asked[at] / self.full);
            notch.control.push(control[at] / self.full);
        }
    }
}
