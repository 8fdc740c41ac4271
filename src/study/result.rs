//! What a check found.

use crate::drive::{GateFigures, RateReason, Scheme};
use crate::map::Map;
use crate::metrics::{AdjacentChannel, EnvelopeFigures, Spectrum, SymbolFigures};
use crate::orbit::{Orbit, Waveform};
use crate::predistort::Table;
use crate::signal::Edge;
use crate::verdict::{Judgement, MaskMargin, Stress};

use super::load::Study;
use super::parts::EfficiencyParts;
use super::replay::ReplayFacts;
use super::shapes::Shape;
use super::warning::Warning;

/// A study carried out.
#[derive(Debug, Clone)]
pub struct CheckResult {
    /// What was asked.
    pub study: Study,
    /// The signal as it was found.
    pub signal: SignalFacts,
    /// The stage as it was solved or read.
    pub map: Map,
    /// How a stage behaves at full supply; absent for a map from a file.
    pub stage: Option<StageFacts>,
    /// What the switch had to stand, where the map knows.
    pub stress: Option<Stress>,
    /// The table that stood in front of the scheme.
    pub table: Option<Table>,
    /// How finely it was sampled.
    pub rate: RateFacts,
    /// The numbers.
    pub metrics: Metrics,
    /// The numbers against the limits.
    pub judgement: Judgement,
    /// Mean spectrum of the output.
    pub output_spectrum: Spectrum,
    /// Mean spectrum of the wanted signal at the output's gain.
    pub wanted_spectrum: Spectrum,
    /// Peak-hold spectra of the output, where limits ask for them.
    pub peak_spectra: Vec<Spectrum>,
    /// Powers of the output.
    pub output_envelope: EnvelopeFigures,
    /// Powers of the wanted signal.
    pub wanted_envelope: EnvelopeFigures,
    /// How often each hundredth of the control's range was used, parts of one.
    pub control_density: Vec<f64>,
    /// Errors of symbols, where the study states the signal's format.
    pub symbols: Option<SymbolFigures>,
    /// A stretch of time around the deepest notch.
    pub notch: Notch,
    /// The gate's pulses, of a scheme that gates the stage.
    pub gate: Option<GateTrain>,
    /// The replay that gave all numbers, and what the map says in its place; absent where the map gave them.
    pub replay: Option<Box<ReplayFacts>>,
    /// What limits how far this can be trusted.
    pub warnings: Vec<Warning>,
}

/// The pulses that gated the stage.
#[derive(Debug, Clone, PartialEq)]
pub struct GateTrain {
    /// Figures of all of them.
    pub figures: GateFigures,
    /// The edges, times from the signal's first sample; only the first [`GateTrain::MOST`] of them.
    pub edges: Vec<Edge>,
}

impl GateTrain {
    /// Edges past this number are counted but not kept: 64 MB.
    pub const MOST: usize = 4 << 20;
}

/// A stage at full supply and width.
#[derive(Debug, Clone)]
pub struct StageFacts {
    /// One period in numbers.
    pub orbit: Orbit,
    /// One period as curves.
    pub waveform: Waveform,
    /// Time in which a deviation falls to 1/e, s.
    pub settling_s: f64,
    /// The drain's waveform at full, half and lowest control.
    pub shapes: Vec<Shape>,
}

/// The signal as it was found.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct SignalFacts {
    /// As the user named it.
    pub file: String,
    /// Samples a second, Hz.
    pub rate_hz: f64,
    /// Samples in the file.
    pub samples: u64,
    /// s
    pub duration_s: f64,
    /// Highest magnitude of the file's samples, full scale 1.
    pub peak: f64,
    /// RMS magnitude of the file's samples, full scale 1.
    pub rms: f64,
}

/// How finely the track was sampled, and whether it was fine enough.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct RateFacts {
    /// Times the signal's rate.
    pub factor: usize,
    /// Hz
    pub rate_hz: f64,
    /// What asked for it.
    pub reason: RateReason,
    /// Samples that were measured.
    pub samples: u64,
    /// The check by doubling.
    pub convergence: Convergence,
}

/// What halving the sample period did.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Convergence {
    /// The coarser factor that was compared; equal to the result's own where there was no room for another.
    pub against_factor: usize,
    /// Largest movement of any margin, dB.
    pub moved_db: f64,
}

/// The numbers, named as in the machine-readable contract.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Metrics {
    /// Mean output power.
    pub power_dbm: f64,
    /// Peak envelope power.
    pub peak_power_dbm: f64,
    /// Peak over mean.
    pub papr_db: f64,
    /// Width that holds 99 % of the power.
    pub occupied_hz: f64,
    /// RMS error: of symbols where the study states the signal's format, else of the waveform in the band.
    pub evm_percent: f64,
    /// Largest error of the same.
    pub evm_peak_percent: f64,
    /// Error that 95 % of the symbols do not exceed.
    pub evm_p95_percent: Option<f64>,
    /// What the three are of: `symbols` or `waveform`.
    pub evm_of: &'static str,
    /// RMS error of the waveform in the band.
    pub waveform_evm_percent: f64,
    /// The band of the waveform's, full width.
    pub evm_band_hz: Option<f64>,
    /// Mean square error in all of the sampled band.
    pub nmse_db: f64,
    /// Delay of the output behind the wanted signal that was taken off.
    pub delay_s: f64,
    /// Magnitude of the gain that was taken off, output volts at full scale.
    pub gain_v: f64,
    /// Angle of that gain.
    pub gain_deg: f64,
    /// Neighbouring channels.
    pub acpr: Vec<AdjacentChannel>,
    /// Every mask segment's tightest point.
    pub mask: Vec<MaskMargin>,
    /// Output over what is drawn from the modulator's own supply; absent where the map knows no current.
    pub efficiency: Option<f64>,
    /// Output over what the stage draws.
    pub stage_efficiency: Option<f64>,
    /// Its factors.
    pub efficiency_parts: EfficiencyParts,
}

/// A stretch of time around the deepest notch of the magnitude.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Notch {
    /// Time from the notch, s.
    pub time_s: Vec<f64>,
    /// Wanted magnitude as a fraction of the control's range.
    pub wanted: Vec<f64>,
    /// What the scheme asked for, same scale.
    pub asked: Vec<f64>,
    /// What reached the stage, same scale.
    pub control: Vec<f64>,
}

impl CheckResult {
    /// The scheme that was used.
    pub fn scheme(&self) -> &Scheme {
        &self.study.scheme
    }
}
