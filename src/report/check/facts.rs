//! Stage, signal, scheme and sampling in words.

use crate::map::Control;
use crate::report::page::FactGroup;
use crate::report::stage::orbit_rows;
use crate::report::text::quantity;
use crate::stage::Arrangement;
use crate::study::{CheckResult, Hardware};

pub(super) fn facts(result: &CheckResult) -> Vec<FactGroup> {
    let own = |name: &str, value: String| (name.to_owned(), value);
    let signal = &result.signal;
    let rate = &result.rate;
    let mut groups = Vec::new();
    if let (Some(facts), Hardware::Stage(stage)) = (&result.stage, &result.study.hardware) {
        let mut rows: Vec<_> = orbit_rows(stage, &facts.orbit)
            .into_iter()
            .map(|[name, value, note]| {
                (
                    name,
                    if note.is_empty() {
                        value
                    } else {
                        format!("{value} ({note})")
                    },
                )
            })
            .collect();
        let one = match stage.switch.arrangement {
            Arrangement::Single => "one switch to ground (class E)".to_owned(),
            Arrangement::Pair { .. } => format!(
                "a switch to each rail, {} dead time (class D)",
                quantity(stage.driver.dead_s, "s", 3)
            ),
        };
        rows.insert(
            0,
            own(
                "arrangement",
                match result.map.control() {
                    Control::Angle => format!("two stages on one load, each with {one}"),
                    _ => one,
                },
            ),
        );
        rows.push(own("settling time", quantity(facts.settling_s, "s", 3)));
        groups.push(FactGroup {
            title: "Stage at full supply".to_owned(),
            rows,
        });
    }
    groups.push(FactGroup {
        title: "Signal".to_owned(),
        rows: vec![
            own("file", signal.file.clone()),
            own("rate", quantity(signal.rate_hz, "Hz", 6)),
            own(
                "length",
                format!(
                    "{} samples, {}",
                    signal.samples,
                    quantity(signal.duration_s, "s", 4)
                ),
            ),
            own("peak", format!("{:.4} of full scale", signal.peak)),
            own(
                "peak over mean",
                format!("{:.2} dB", 20.0 * (signal.peak / signal.rms).log10()),
            ),
            own(
                "level",
                format!(
                    "full scale is {} of the supply's range",
                    result.study.signal.level
                ),
            ),
        ],
    });
    groups.push(FactGroup {
        title: "Scheme".to_owned(),
        rows: crate::report::scheme::scheme_rows(result.scheme()),
    });
    if let Some(table) = &result.table {
        groups.push(FactGroup {
            title: "Predistortion table".to_owned(),
            rows: crate::report::predistort::table_rows(table),
        });
    }
    groups.push(FactGroup {
        title: "Sampling".to_owned(),
        rows: vec![
            own(
                "oversampling",
                format!("{}x, {}", rate.factor, quantity(rate.rate_hz, "Hz", 6)),
            ),
            own("asked for by", rate.reason.text().to_owned()),
            own(
                "check by doubling",
                format!(
                    "from {}x to {}x margins moved by {:.3} dB at most (those past 30 dB not counted)",
                    rate.convergence.against_factor, rate.factor, rate.convergence.moved_db
                ),
            ),
            own("instants measured", rate.samples.to_string()),
            own(
                "mean spectrum",
                format!(
                    "{} segments, noise bandwidth {}",
                    result.output_spectrum.segments,
                    quantity(result.output_spectrum.enbw_hz, "Hz", 4)
                ),
            ),
            own(
                "taken off before the comparison",
                format!(
                    "delay {}, gain {} at {:.2} deg",
                    quantity(result.metrics.delay_s, "s", 4),
                    quantity(result.metrics.gain_v, "V", 4),
                    result.metrics.gain_deg
                ),
            ),
        ],
    });
    groups.extend(super::replay::facts(result));
    groups
}
