//! What limits how far a measurement can be trusted.

use super::CaptureMetrics;
use crate::metrics::Sync;
use crate::study::result::SignalFacts;
use crate::verdict::Judgement;

/// Fewer segments than this are worth a warning.
const FEW_SEGMENTS: u64 = 25;

/// A correlation below this is worth a warning.
const WEAK: f64 = 0.7;

pub(super) fn cautions(
    signal: &SignalFacts,
    metrics: &CaptureMetrics,
    segments: u64,
    sync: Option<&Sync>,
    judgement: &Judgement,
) -> Vec<String> {
    let mut warnings = Vec::new();
    if segments < FEW_SEGMENTS {
        warnings.push(format!(
            "the spectrum averages only {} segments, so that each reading is uncertain by about {:.1} dB: use a longer capture",
            segments,
            4.34 / (segments as f64).sqrt()
        ));
    }
    // A carrier beside the middle of the emission moves every offset.
    if sync.is_none() && metrics.occupied_centre_hz.abs() > 0.05 * metrics.occupied_hz {
        warnings.push(format!(
            "the emission is centred {} from offset 0: masks and channels are read around offset 0 all the same. Give the sent signal with --reference, and its frequency offset is taken off",
            crate::units::show(metrics.occupied_centre_hz, "Hz", 4)
        ));
    }
    if signal.peak >= 0.9999 && signal.peak <= 1.0 {
        warnings.push("the capture reaches full scale: its receiver may have clipped".to_owned());
    }
    if let Some(sync) = sync {
        if sync.correlation < WEAK {
            warnings.push(format!(
                "the capture follows its reference weakly, with a correlation of {:.2}: noise, or another signal",
                sync.correlation
            ));
        }
        if sync.to - sync.from < signal.samples * 19 / 20 {
            warnings.push(format!(
                "only samples {} to {} of the capture's {} follow the reference: every number is of these",
                sync.from, sync.to, signal.samples
            ));
        }
    }
    warnings.extend(judgement.warnings.iter().cloned());
    warnings
}
