//! One period of waveforms, for pictures.

use std::f64::consts::TAU;

use super::linear::UnitSample;
use super::schedule::Span;

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
    /// The further switches, where there are several.
    pub others: Vec<OtherSwitch>,
}

/// A further switch over the same period.
#[derive(Debug, Clone, PartialEq)]
pub struct OtherSwitch {
    /// `lower` of a pair, `second` of two stages.
    pub name: String,
    /// When it closes and opens, s.
    pub closed_s: (f64, f64),
    /// A
    pub switch_a: Vec<f64>,
    /// V, of its own node where that is another.
    pub drain_v: Option<Vec<f64>>,
}

impl Waveform {
    pub(super) fn scaled(
        samples: &[UnitSample],
        period_s: f64,
        load_ohm: f64,
        supply_v: f64,
        spans: &[Span],
        names: &[String],
    ) -> Self {
        let time = |angle_rad: f64| angle_rad / TAU * period_s;
        let column = |value: &dyn Fn(&UnitSample) -> f64, scale: f64| -> Vec<f64> {
            samples.iter().map(|sample| value(sample) * scale).collect()
        };
        let closed_s = |span: &Span| {
            (
                time(span.closing_rad),
                time(span.closing_rad + span.width_rad),
            )
        };
        let current = |index: usize| {
            column(
                &|sample| sample.contacts.get(index).copied().unwrap_or(0.0),
                supply_v / load_ohm,
            )
        };
        let leg = |index: usize| {
            column(
                &|sample| sample.legs.get(index).copied().unwrap_or(0.0),
                supply_v,
            )
        };
        // The contacts of a leg stand together: half of them at the second one where there are two.
        let legs = samples.first().map_or(1, |sample| sample.legs.len());
        let each = spans.len() / legs.max(1);
        Self {
            period_s,
            closed_s: spans.first().map_or((0.0, 0.0), closed_s),
            time_s: samples
                .iter()
                .map(|sample| time(sample.angle_rad))
                .collect(),
            drain_v: leg(0),
            switch_a: current(0),
            load_v: column(&|sample| sample.load, supply_v),
            others: spans
                .iter()
                .enumerate()
                .skip(1)
                .map(|(index, span)| OtherSwitch {
                    name: names.get(index).cloned().unwrap_or_default(),
                    closed_s: closed_s(span),
                    switch_a: current(index),
                    drain_v: (index == each).then(|| leg(1)),
                })
                .collect(),
        }
    }
}
