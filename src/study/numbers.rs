//! The numbers of a run.

use super::error::StudyError;
use super::load::Study;
use super::parts::EfficiencyParts;
use super::result::Metrics;
use super::run::Run;
use crate::metrics::{ChannelFilter, adjacent_channels, occupied_bandwidth};
use crate::units::dbm_from_watt;
use crate::verdict::Judgement;

pub(super) fn metrics(
    study: &Study,
    run: &Run,
    judgement: &Judgement,
) -> Result<Metrics, StudyError> {
    let acpr = if judgement.acpr.is_empty() {
        default_acpr(study, run)
    } else {
        judgement.acpr.clone()
    };
    let symbols = run.symbols.as_ref();
    let known = |efficiency: f64| efficiency.is_finite().then_some(efficiency);
    Ok(Metrics {
        power_dbm: dbm_from_watt(run.output_envelope.mean_w),
        peak_power_dbm: dbm_from_watt(run.output_envelope.peak_w),
        papr_db: run.output_envelope.papr_db,
        occupied_hz: occupied_bandwidth(&run.output_spectrum, 0.99)?.width_hz(),
        evm_percent: symbols.map_or(run.errors.evm_percent, |s| s.evm_percent),
        evm_peak_percent: symbols.map_or(run.errors.evm_peak_percent, |s| s.evm_peak_percent),
        evm_p95_percent: symbols.map(|s| s.evm_p95_percent),
        evm_of: if symbols.is_some() {
            "symbols"
        } else {
            "waveform"
        },
        waveform_evm_percent: run.errors.evm_percent,
        evm_band_hz: run.errors.band_hz,
        nmse_db: run.errors.nmse_db,
        delay_s: run.alignment.delay_s,
        gain_v: run.alignment.gain.norm(),
        gain_deg: run.alignment.gain.arg().to_degrees(),
        acpr,
        mask: judgement.mask.clone(),
        efficiency: known(run.energy.efficiency()),
        stage_efficiency: known(run.energy.stage_efficiency()),
        efficiency_parts: EfficiencyParts::of(&run.energy),
    })
}

/// Where no limit asks for neighbours: two equal channels to each side, where the channel's width is known.
fn default_acpr(study: &Study, run: &Run) -> Vec<crate::metrics::AdjacentChannel> {
    let Some(channel_hz) = study
        .limits
        .channel_hz
        .or(study.limits.authorized_bandwidth_hz)
    else {
        return Vec::new();
    };
    let filter = ChannelFilter::Flat {
        bandwidth_hz: channel_hz,
    };
    let neighbours = [(channel_hz, filter), (2.0 * channel_hz, filter)];
    adjacent_channels(&run.output_spectrum, &filter, &neighbours).unwrap_or_default()
}
