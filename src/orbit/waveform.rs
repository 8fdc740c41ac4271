//! One period of waveforms, for pictures.

use std::f64::consts::TAU;

use super::linear::UnitSample;
use super::network::Drive;
use crate::stage::Stage;

/// Drain voltage, switch current and load voltage over one period, from the instant the switch closes.
#[derive(Debug, Clone, PartialEq)]
pub struct Waveform {
    /// One period of the carrier, s.
    pub period_s: f64,
    /// When the switch closes and opens, s; 0 is the middle of the closed interval at full width.
    pub closed_s: (f64, f64),
    /// Instants, s. The opening instant stands twice: just before and just after.
    pub time_s: Vec<f64>,
    /// V
    pub drain_v: Vec<f64>,
    /// A
    pub switch_a: Vec<f64>,
    /// V across the load resistance.
    pub load_v: Vec<f64>,
}

impl Waveform {
    pub(super) fn scaled(
        samples: &[UnitSample],
        stage: &Stage,
        supply_v: f64,
        drive: &Drive,
    ) -> Self {
        let period_s = stage.period_s();
        let time = |angle_rad: f64| angle_rad / TAU * period_s;
        let column = |value: fn(&UnitSample) -> f64, scale: f64| {
            samples.iter().map(|sample| value(sample) * scale).collect()
        };
        Self {
            period_s,
            closed_s: (
                time(drive.closing_rad),
                time(drive.closing_rad + drive.width_rad),
            ),
            time_s: samples
                .iter()
                .map(|sample| time(sample.angle_rad))
                .collect(),
            drain_v: column(|sample| sample.drain, supply_v),
            switch_a: column(|sample| sample.switch, supply_v / stage.load.ohm),
            load_v: column(|sample| sample.load, supply_v),
        }
    }
}
