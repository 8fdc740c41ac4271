//! What a result is warned about.

use super::check::CONVERGED_DB;
use super::load::Hardware;
use super::result::{CheckResult, RateFacts};
use super::validity::of_scheme;
use super::warning::Warning;
use crate::drive::{AngleReach, GateFigures, MAX_FACTOR, Scheme, WidthLaw};
use crate::map::{Control, Origin};
use crate::math::edges::CLEAN_BAND;

/// Joined branches that do not cancel below this part of full output fill the deepest notches.
const FILLED_NOTCH: f64 = 0.01;

/// Fewer segments than this are worth a warning.
const FEW_SEGMENTS: u64 = 25;

/// A stage that settles slower than this part of the signal's sample period has memory worth a warning:
/// a lag of a hundredth of a sample period costs about -40 dB at the edge of the band.
const SLOW: f64 = 0.01;

/// Modes that leave more than this of a gate's transition stand for it poorly.
const POOR_FIT: f64 = 0.1;

/// A pulse sequence that ends this part of the signal's duration before or after it is worth a warning.
const OTHER_LENGTH: f64 = 0.01;

/// Steps of the grid that the narrowest pulse must have: a tenth of its amplitude to a step, and two edges.
const GRID_STEPS: f64 = 10.0;

/// Whether the deepest notch is narrower than the grid or the shortest pulse can follow.
fn coarse_grid(result: &CheckResult) -> Option<Warning> {
    let Scheme::Width(scheme) = result.scheme() else {
        return None;
    };
    let carrier_hz = result.map.frequency_hz();
    let asked = result.notch.asked.iter().copied().reduce(f64::min)?;
    let notch_s = asked * result.study.full_control() / carrier_hz;
    let grid_s = scheme.grid_s.unwrap_or(0.0);
    (notch_s < GRID_STEPS * grid_s || notch_s < scheme.shortest_s).then_some(
        Warning::GridTooCoarse {
            notch_s,
            grid_s,
            shortest_s: scheme.shortest_s,
        },
    )
}

/// What the gate of bursts could not do well.
pub(super) fn gate_warnings(result: &CheckResult) -> Vec<Warning> {
    let mut warnings = Vec::new();
    let Some(train) = &result.gate else {
        return warnings;
    };
    let GateFigures {
        edges,
        hurried,
        overloads,
        shortest_s,
        transition_s,
        fit,
    } = train.figures;
    // A replay has the transitions of the stage, whatever its modes.
    let by_map = result.replay.is_none();
    if by_map && hurried > 0 {
        warnings.push(Warning::HurriedGate {
            fraction: hurried as f64 / edges as f64,
            shortest_s,
            transition_s,
        });
    }
    if by_map && fit > POOR_FIT {
        warnings.push(Warning::PoorTransition { left: fit });
    }
    if overloads > 0 {
        warnings.push(Warning::OverloadedShaping { ticks: overloads });
    }
    if let Scheme::Burst(burst) = result.scheme()
        && burst.transitions_s.is_some()
        && !by_map
    {
        warnings.push(Warning::OwnTransitions);
    }
    if let Scheme::Burst(burst) = result.scheme()
        && let Some(pulses) = &burst.pulses
    {
        let end_s = pulses.start_s + pulses.sequence.end_s;
        let signal_s = result.signal.duration_s;
        if (end_s - signal_s).abs() > OTHER_LENGTH * signal_s {
            warnings.push(Warning::PulsesOfOtherLength { end_s, signal_s });
        }
    }
    if let Scheme::Burst(burst) = result.scheme()
        && burst.filter.is_none()
        && burst.rate_hz > 0.0
    {
        warnings.push(Warning::BurstsOutOfSight {
            rate_hz: burst.rate_hz,
            seen_hz: CLEAN_BAND * result.rate.rate_hz,
        });
    }
    warnings
}

pub(super) fn warnings(result: &CheckResult, held: f64) -> Vec<Warning> {
    let mut warnings = Vec::new();
    let RateFacts {
        factor,
        convergence,
        ..
    } = result.rate;
    if convergence.moved_db.is_nan() || convergence.moved_db > CONVERGED_DB {
        warnings.push(Warning::NotConverged {
            moved_db: convergence.moved_db,
            factor,
        });
    }
    if factor == MAX_FACTOR {
        warnings.push(Warning::RateLimited { factor });
    }
    let highest = result.signal.peak * result.study.signal.level;
    if highest > 1.0 {
        warnings.push(Warning::AboveFullScale {
            peak: result.signal.peak,
        });
    }
    if held > 0.0 {
        warnings.push(Warning::HeldAtEdge { fraction: held });
    }
    if let (Scheme::Width(scheme), Some(turn)) = (result.scheme(), result.map.turns_at())
        && scheme.law != WidthLaw::Sine
    {
        warnings.push(Warning::WidthTurns { width: turn });
    }
    if result.map.control() == Control::Angle {
        let reach = AngleReach::of(result.map.known());
        if reach.lowest > FILLED_NOTCH || reach.full_rad > 0.0 {
            warnings.push(Warning::AngleReach {
                full_deg: reach.full_rad.to_degrees(),
                lowest_db: crate::units::db(reach.lowest * reach.lowest),
            });
        }
    }
    if let Some(coarse) = coarse_grid(result) {
        warnings.push(coarse);
    }
    warnings.extend(of_scheme(result));
    if let Some(first) = result.map.failures().first() {
        warnings.push(Warning::PointsFailed {
            count: result.map.failures().len(),
            reason: first.reason.clone(),
        });
    }
    if let Some(stage) = &result.stage {
        // A silicon junction starts to conduct at about 0.7 V (common practice).
        let modelled = match &result.study.hardware {
            Hardware::Stage(stage) => stage.switch.diode.is_some(),
            Hardware::Map(_) => true,
        };
        // Joined and paired switches go beyond their rails away from full output.
        let lowest_v = match &result.study.hardware {
            Hardware::Stage(hardware)
                if hardware.is_pair() || result.map.control() == Control::Angle =>
            {
                result
                    .map
                    .points()
                    .iter()
                    .filter_map(|point| point.switch_min_v)
                    .fold(stage.orbit.switch_min_v, f64::min)
            }
            _ => stage.orbit.switch_min_v,
        };
        if !modelled && lowest_v < -0.7 {
            warnings.push(match stage.orbit.switches.is_empty() {
                true => Warning::DiodeWouldConduct { lowest_v },
                false => Warning::BeyondRails { lowest_v },
            });
        }
        let signal_s = 1.0 / result.signal.rate_hz;
        if result.replay.is_none() && stage.settling_s > SLOW * signal_s {
            warnings.push(Warning::SlowStage {
                settling_s: stage.settling_s,
                signal_s,
            });
        }
    }
    if result.map.origin() == Origin::File {
        let mut missing = vec!["stress of the switch", "memory of the stage"];
        if result.metrics.efficiency.is_none() {
            missing.push("efficiency");
        }
        warnings.push(Warning::MapFromFile { missing });
    }
    if result.output_spectrum.segments < FEW_SEGMENTS {
        warnings.push(Warning::FewAverages {
            segments: result.output_spectrum.segments,
        });
    }
    warnings.extend(
        result
            .judgement
            .warnings
            .iter()
            .cloned()
            .map(Warning::Limits),
    );
    warnings
}
