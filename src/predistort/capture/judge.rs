//! Whether a further table helps.
//!
//! The best next table takes the static bend away and leaves memory, noise and its own rounding: it gains
//! `linear_rest / (static_rest + rounding)`. Less than 0.1 dB of that is no help; neither is a table that bettered
//! what one gain leaves by less than 0.1 dB against the table before it.

use super::cloud::StaticFit;
use crate::units::db;

/// A gain below this is none, dB.
pub const HELPS_DB: f64 = 0.1;

/// What one capture showed of the table in force.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize, serde::Deserialize)]
pub struct Pass {
    /// Mean square that one gain leaves of the output, over the output's, dB.
    pub linear_rest_db: f64,
    /// What the static output leaves, dB: memory and noise.
    pub static_rest_db: f64,
}

/// Whether to go on.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
#[serde(tag = "state", rename_all = "snake_case")]
pub enum LoopEnd {
    /// The next table takes static bend away.
    Helps {
        /// By so much, at best, dB.
        expected_db: f64,
    },
    /// Nothing more is to be had.
    StoppedHelping {
        /// Why.
        by: StoppedBy,
        /// The gain still expected, dB.
        expected_db: f64,
    },
}

/// Why a further table does not help.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum StoppedBy {
    /// What is left is memory, noise and rounding.
    Spread,
    /// The table in force bettered the one before it by less than 0.1 dB.
    NoProgress,
}

impl LoopEnd {
    /// True while a further table helps.
    pub fn helps(&self) -> bool {
        matches!(self, Self::Helps { .. })
    }
}

/// Judges the capture `fit` of a table that came out of `before`, the passes before it; `rounding_db` is the next
/// table's.
pub fn judge_pass(fit: &StaticFit, rounding_db: f64, before: &[Pass]) -> LoopEnd {
    let power = |level_db: f64| 10f64.powf(level_db / 10.0);
    let unmendable = power(fit.static_rest_db) + power(rounding_db);
    let expected_db = fit.linear_rest_db - db(unmendable);
    let stopped = |by| LoopEnd::StoppedHelping { by, expected_db };
    if expected_db < HELPS_DB {
        return stopped(StoppedBy::Spread);
    }
    match before.last() {
        Some(last) if last.linear_rest_db - fit.linear_rest_db < HELPS_DB => {
            stopped(StoppedBy::NoProgress)
        }
        _ => LoopEnd::Helps { expected_db },
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn fit(linear_rest_db: f64, static_rest_db: f64) -> StaticFit {
        StaticFit {
            points: Vec::new(),
            linear_rest_db,
            static_rest_db,
            left_out: 0.0,
            samples: 1000,
            level: 1.0,
        }
    }

    #[test]
    fn help_is_what_a_gain_leaves_over_spread_and_rounding() {
        let pass = |linear_rest_db| Pass {
            linear_rest_db,
            static_rest_db: -50.0,
        };
        let helps = judge_pass(&fit(-30.0, -50.0), -90.0, &[]);
        assert!(
            matches!(helps, LoopEnd::Helps { expected_db } if (expected_db - 20.0).abs() < 0.01)
        );
        // Spread and rounding alike: 3 dB above either.
        let end = judge_pass(&fit(-46.95, -50.0), -50.0, &[pass(-30.0)]);
        assert!(matches!(
            end,
            LoopEnd::StoppedHelping {
                by: StoppedBy::Spread,
                ..
            }
        ));
        let end = judge_pass(&fit(-40.0, -50.0), -90.0, &[pass(-40.0)]);
        assert!(matches!(
            end,
            LoopEnd::StoppedHelping {
                by: StoppedBy::NoProgress,
                ..
            }
        ));
        assert!(judge_pass(&fit(-42.0, -50.0), -90.0, &[pass(-40.0)]).helps());
    }
}
