//! Scheme `burst`: the magnitude becomes a train of pulses far below the carrier, which gates the stage on and off.
//!
//! ```text
//! x -- delay -- |.| -- level -- pulses -- grid, shortest -- gate -- rise and fall of the stage --(x)-- filter -- output
//!   \- delay -- x/|x| -- low-pass, limiter --------------------------------------------------/
//! ```

mod drive;
mod pulses;
mod sequence;

use crate::math::modal::Prototype;
use crate::orbit::Gating;

use super::rate::{RateReason, band};
use super::supply::{PhasePath, settling};

pub(super) use drive::BurstDrive;
pub use drive::GateFigures;
pub(crate) use drive::{FILTER_LAG, GATE_LAG};
pub(super) use sequence::read_pulses;
pub use sequence::{PulseFile, PulseSequence};

/// How the magnitude becomes pulses.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Sampling {
    /// A ramp is compared with the magnitude as it is.
    Natural,
    /// A ramp is compared with the magnitude at the start of its period (of its half period where two updates are asked for).
    Uniform,
    /// The nearest level at every clock tick, with the error fed back: `y = m + (1 - 1/z)^order e`.
    Shaped,
    /// The pulses come from a file.
    File,
}

/// Which edges of a pulse the magnitude moves.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum MovedEdges {
    /// The second one: a sawtooth.
    One,
    /// Both: a triangle.
    Two,
}

/// How often a uniformly sampled triangle takes the magnitude.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Updates {
    /// Once a period: pulses are symmetric.
    Once,
    /// Twice a period: each edge has its own sample.
    Twice,
}

/// What becomes of the power that a filter does not let through.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum StopBand {
    /// It is burnt in front of the filter, and the stage sees its own load: nothing is saved.
    Absorbed,
    /// It returns, and the stage draws less in proportion: the most that can be saved.
    Reflected,
}

/// The response of a band-pass.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum BandShape {
    /// -3 dB at the edges of the band.
    Butterworth,
    /// Chebyshev of the first kind: down by the ripple at the edges of the band.
    Chebyshev {
        /// dB
        ripple_db: f64,
    },
}

/// A band-pass about the carrier behind the stage.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct BandFilter {
    /// Its response.
    pub shape: BandShape,
    /// Resonators.
    pub order: u32,
    /// Full width of the band, Hz.
    pub bandwidth_hz: f64,
    /// Lost in the pass band, dB.
    pub loss_db: f64,
    /// What becomes of the rest.
    pub stop_band: StopBand,
}

impl BandFilter {
    /// Its low-pass about the carrier; the band edge is half the bandwidth.
    pub fn prototype(&self) -> Prototype {
        match self.shape {
            BandShape::Butterworth => Prototype::butterworth(self.order),
            BandShape::Chebyshev { ripple_db } => Prototype::chebyshev(self.order, ripple_db),
        }
    }
}

/// The scheme as the study describes it.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct BurstScheme {
    /// From the magnitude to pulses.
    pub sampling: Sampling,
    /// Periods of the ramp or ticks of the clock a second; 0 where the pulses come from a file.
    pub rate_hz: f64,
    /// Which edges the magnitude moves.
    pub edges: MovedEdges,
    /// How often a uniformly sampled triangle takes the magnitude.
    pub updates: Updates,
    /// Order of noise shaping, 1 or 2.
    pub order: u32,
    /// Levels of the gate, off and full included.
    pub levels: u32,
    /// Grid of the edges, s.
    pub grid_s: Option<f64>,
    /// Shortest time between two edges, s.
    pub shortest_s: f64,
    /// Dead time from the magnitude to the gate, s.
    pub delay_s: f64,
    /// What makes the drive's phase.
    pub phase_path: PhasePath,
    /// Time constants that replace those of the stage, s: rise and fall.
    pub transitions_s: Option<(f64, f64)>,
    /// Behind the stage.
    pub filter: Option<BandFilter>,
    /// Where the pulses come from, if from a file.
    pub pulses: Option<PulseFile>,
}

impl BurstScheme {
    /// How the stage answers its gate: as stated, else as its map knows, else at once.
    pub fn gating(&self, stage: Option<&Gating>) -> Gating {
        match (self.transitions_s, stage) {
            (Some((rise_s, fall_s)), _) => Gating::of_time_constants(rise_s, fall_s),
            (None, Some(gating)) => gating.clone(),
            (None, None) => Gating::of_time_constants(0.0, 0.0),
        }
    }

    pub(super) fn settling(&self, rate_hz: f64) -> usize {
        let narrowest = self.filter.map(|filter| 0.5 * filter.bandwidth_hz);
        let dead_s = self.delay_s.max(self.phase_path.delay_s);
        // Ripple makes a filter ring longer: twice the time of a Butterworth response is taken.
        drive::LATEST
            + settling(
                dead_s,
                &[narrowest.map(|hz| 0.5 * hz), self.phase_path.bandwidth_hz],
                rate_hz,
            )
    }

    pub(super) fn rates(&self, signal_rate_hz: f64) -> Vec<(f64, RateReason)> {
        // Edges are exact at any rate: it only decides which lines are seen. The first ones of a ramp, and shaped noise to its
        // clock, lie within the clean band.
        let per_second = match (self.sampling, &self.pulses) {
            (Sampling::Natural | Sampling::Uniform, _) => 4.0 * self.rate_hz,
            (Sampling::Shaped, _) => 2.5 * self.rate_hz,
            (Sampling::File, Some(file)) => 2.0 * file.sequence.edges_per_s(),
            (Sampling::File, None) => 0.0,
        };
        let width_hz = self.filter.map_or(0.0, |filter| filter.bandwidth_hz);
        vec![
            (per_second, RateReason::Bursts),
            (4.0 * width_hz, RateReason::Filter),
            (
                band(self.phase_path.bandwidth_hz, signal_rate_hz),
                RateReason::PhaseBandwidth,
            ),
        ]
    }
}
