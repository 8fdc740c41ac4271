//! Capture, reference and what was taken off, in words.

use crate::report::page::FactGroup;
use crate::report::text::{quantity, signed};
use crate::study::{MeasureResult, Scale, SignalFacts};
use crate::units;

pub(super) fn facts(result: &MeasureResult) -> Vec<FactGroup> {
    let own = |name: &str, value: String| (name.to_owned(), value);
    let of = |title: &str, signal: &SignalFacts| FactGroup {
        title: title.to_owned(),
        rows: vec![
            own("file", signal.file.clone()),
            own("rate", quantity(signal.rate_hz, "Hz", 9)),
            own(
                "length",
                format!(
                    "{} samples, {}",
                    signal.samples,
                    quantity(signal.duration_s, "s", 4)
                ),
            ),
            own("peak", format!("{:.4} of full scale", signal.peak)),
        ],
    };
    let mut groups = vec![of("Capture", &result.signal)];
    if let Some(sent) = &result.reference {
        groups.push(of("Reference", sent));
    }
    if let Some(sync) = &result.sync {
        groups.push(FactGroup {
            title: "Taken off before anything was read".to_owned(),
            rows: vec![
                own("delay", quantity(sync.delay_s, "s", 7)),
                own(
                    "clock of the reference against the capture's",
                    format!("{:+.4} millionths", 1e6 * sync.rate_error),
                ),
                own(
                    "frequency offset",
                    format!(
                        "{}, known to {}",
                        signed(sync.frequency_hz, "Hz", 7),
                        quantity(sync.frequency_deviation_hz, "Hz", 2)
                    ),
                ),
                own(
                    "drift",
                    format!("{}/s", signed(sync.drift_hz_per_s, "Hz", 4)),
                ),
                own(
                    "gain",
                    format!(
                        "{:.3} dB at {:.2} deg",
                        2.0 * units::db(sync.gain.norm()),
                        sync.gain.arg().to_degrees()
                    ),
                ),
                own("correlation", format!("{:.6}", sync.correlation)),
                own(
                    "slow phase noise",
                    format!("{:.3} deg RMS", sync.slow_phase_deg),
                ),
                own("samples compared", format!("{} to {}", sync.from, sync.to)),
            ],
        });
    }
    groups.push(FactGroup {
        title: "Spectrum".to_owned(),
        rows: vec![
            own("segments", result.spectrum.segments.to_string()),
            own(
                "noise bandwidth",
                quantity(result.spectrum.enbw_hz, "Hz", 4),
            ),
            own(
                "scale",
                match result.request.scale {
                    Scale::Unknown => "not stated: only ratios are known".to_owned(),
                    Scale::FullScale { full_scale_w } => format!(
                        "a constant magnitude of 1 is {:.2} dBm",
                        units::dbm_from_watt(full_scale_w)
                    ),
                    Scale::Volts { load_ohm } => {
                        format!("peak volts over {}", quantity(load_ohm, "ohm", 4))
                    }
                },
            ),
        ],
    });
    groups
}
