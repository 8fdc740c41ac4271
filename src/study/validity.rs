//! Where a scheme's model ends: what must hold for its numbers to be of the hardware.

use std::f64::consts::TAU;

use super::result::CheckResult;
use super::warning::Warning;
use crate::drive::{Combining, OutphaseScheme, Scheme};
use crate::map::Control;

/// A tone on the supply turns by less than this part of a radian while the stage settles: its sidebands are then right
/// to 0.05 dB (one pole at the stage's own settling time).
const TURN_RAD: f64 = 0.1;

/// A rail settles to 1 % in at least this many times of the stage's own settling time (to 1/e): the stage is then as good
/// as settled all along.
const RAIL_TO_STAGE: f64 = 10.0;

/// How much wider than the signal the branches of outphasing are, about: their phase has the angle's square root at full
/// output (common practice).
const BRANCH_WIDENING: f64 = 4.0;

/// A stage that settles slower than this part of the time in which its branches move has memory worth a warning.
const SLOW: f64 = 0.01;

/// Past this difference of the branches, dB, the weaker one no longer draws about as much as the other.
const UNEQUAL_DB: f64 = 0.5;

/// Warnings about the limits of the scheme's model.
pub(super) fn of_scheme(result: &CheckResult) -> Vec<Warning> {
    let mut warnings = Vec::new();
    let carrier_hz = result.map.frequency_hz();
    let span_hz = 0.5 * result.rate.rate_hz;
    if span_hz > 0.5 * carrier_hz {
        warnings.push(Warning::WiderThanCarrier {
            span_hz,
            carrier_hz,
        });
    }
    warnings.extend(below_map(result));
    // A replay knows the stage's own time.
    let settling_s = match (&result.stage, &result.replay) {
        (Some(stage), None) => stage.settling_s,
        _ => 0.0,
    };
    match result.scheme() {
        Scheme::Supply(scheme) => {
            if let Some(ripple) = scheme.modulator.ripple
                && TAU * ripple.frequency_hz * settling_s > TURN_RAD
            {
                warnings.push(Warning::RippleFasterThanStage {
                    frequency_hz: ripple.frequency_hz,
                    settling_s,
                });
            }
        }
        Scheme::Levels(scheme) if scheme.settling_s < RAIL_TO_STAGE * settling_s => {
            warnings.push(Warning::RailsFasterThanStage {
                rail_s: scheme.settling_s,
                settling_s,
            });
        }
        Scheme::Outphase(scheme) => warnings.extend(branches(result, scheme, settling_s)),
        _ => {}
    }
    warnings
}

/// Whether the deepest notch lies below the lowest output that the width map knows.
fn below_map(result: &CheckResult) -> Option<Warning> {
    let map = &result.map;
    // Bursts make little output of rare pulses, not of narrow ones.
    if map.control() != Control::Width || matches!(result.scheme(), Scheme::Burst(_)) {
        return None;
    }
    let mut lowest = map.amplitude_held_v(map.domain().0) / map.full_amplitude_v();
    if let Scheme::Levels(levels) = result.scheme() {
        let rails = levels.rails.parts(map.own_supply_v());
        lowest *= rails.first().copied().unwrap_or(1.0);
    }
    let notch = result.notch.wanted.iter().copied().reduce(f64::min)?;
    (notch < lowest).then_some(Warning::NotchBelowMap { notch, lowest })
}

fn branches(result: &CheckResult, scheme: &OutphaseScheme, settling_s: f64) -> Vec<Warning> {
    let mut warnings = Vec::new();
    let joined = matches!(scheme.combining, Combining::Joined(_));
    let branch_s = 1.0 / (BRANCH_WIDENING * result.signal.rate_hz);
    let signal_s = 1.0 / result.signal.rate_hz;
    // Slower stages have the warning that holds for every scheme.
    if settling_s > SLOW * branch_s && settling_s <= SLOW * signal_s {
        warnings.push(match joined {
            // No replay knows them.
            true => Warning::SlowStage {
                settling_s,
                signal_s: branch_s,
            },
            false => Warning::BranchesFasterThanStage {
                settling_s,
                branch_s,
            },
        });
    }
    // What joined branches draw is solved.
    if !joined && scheme.gain_mismatch_db > UNEQUAL_DB {
        warnings.push(Warning::UnequalBranches {
            gain_db: scheme.gain_mismatch_db,
        });
    }
    warnings
}
