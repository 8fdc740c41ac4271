//! Peak voltage and current of solved orbits against the ratings of a device.

use super::judge::Stress;
use super::outcome::{Check, Outcome, Verdict};
use super::rows::room;
use crate::units::show;

/// What a switch may stand; what is absent is not checked.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Ratings {
    /// Drain voltage, V.
    pub peak_voltage_v: Option<f64>,
    /// Switch current, A.
    pub peak_current_a: Option<f64>,
}

/// One orbit's stress and where it was met.
#[derive(Debug, Clone, PartialEq)]
pub struct Stressed {
    /// In words, such as `at 3 V`.
    pub place: String,
    /// What the switch stands there.
    pub stress: Stress,
}

impl Ratings {
    /// Whether there is nothing to check.
    pub fn is_empty(&self) -> bool {
        self.peak_voltage_v.is_none() && self.peak_current_a.is_none()
    }

    fn rows(&self) -> impl Iterator<Item = (&'static str, &'static str, f64, fn(&Stress) -> f64)> {
        let volts: fn(&Stress) -> f64 = |stress| stress.peak_v;
        let amps: fn(&Stress) -> f64 = |stress| stress.peak_a;
        let rows = [
            ("peak drain voltage", "V", self.peak_voltage_v, volts),
            ("peak switch current", "A", self.peak_current_a, amps),
        ];
        rows.into_iter()
            .filter_map(|(name, unit, rating, found)| Some((name, unit, rating?, found)))
    }

    /// How one orbit stands against them.
    pub fn outcome(&self, stress: &Stress) -> Outcome {
        let outcomes = self
            .rows()
            .map(|(_, _, rating, found)| Outcome::of_margin(margin_db(rating, found(stress))));
        worst(outcomes)
    }

    /// The verdict over `points`: each rating at its worst point. `unsolved` points are known to no one, so that a
    /// rating that holds at all others stays undecided.
    pub fn verdict(&self, points: &[Stressed], unsolved: usize) -> Verdict {
        let checks = self
            .rows()
            .map(|(name, unit, rating, found)| {
                let worst = points
                    .iter()
                    .max_by(|a, b| found(&a.stress).total_cmp(&found(&b.stress)));
                check(
                    name,
                    unit,
                    rating,
                    worst.map(|w| (found(&w.stress), w.place.as_str())),
                    unsolved,
                )
            })
            .collect();
        Verdict::of(checks)
    }
}

fn worst(outcomes: impl Iterator<Item = Outcome>) -> Outcome {
    outcomes.fold(Outcome::Within, |so_far, outcome| match (so_far, outcome) {
        (Outcome::Outside, _) | (_, Outcome::Outside) => Outcome::Outside,
        (Outcome::Undecided, _) | (_, Outcome::Undecided) => Outcome::Undecided,
        _ => Outcome::Within,
    })
}

/// A switch that stands nothing is as far within as can be.
fn margin_db(rating: f64, found: f64) -> f64 {
    20.0 * (rating / found.max(f64::MIN_POSITIVE)).log10()
}

fn check(
    name: &str,
    unit: &str,
    rating: f64,
    worst: Option<(f64, &str)>,
    unsolved: usize,
) -> Check {
    let allowed = show(rating, unit, 4);
    let margin_db = worst.map(|(found, _)| margin_db(rating, found));
    let mut outcome = margin_db.map_or(Outcome::Undecided, Outcome::of_margin);
    let mut reason = match (worst, margin_db) {
        (Some((found, place)), Some(margin_db)) => format!(
            "reaches {} {place}, rated {allowed}: {}",
            show(found, unit, 4),
            room(margin_db)
        ),
        _ => format!("nothing was solved; rated {allowed}"),
    };
    if unsolved > 0 {
        reason.push_str(&format!("; {unsolved} points have no orbit"));
        if outcome == Outcome::Within {
            outcome = Outcome::Undecided;
        }
    }
    Check {
        name: name.to_owned(),
        outcome,
        margin_db,
        found: worst.map(|(found, _)| show(found, unit, 4)),
        allowed: Some(allowed),
        reason,
        set: None,
        obtained: None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn at(place: &str, peak_v: f64, peak_a: f64) -> Stressed {
        Stressed {
            place: place.to_owned(),
            stress: Stress { peak_v, peak_a },
        }
    }

    #[test]
    fn the_worst_point_decides_and_is_named() {
        let ratings = Ratings {
            peak_voltage_v: Some(30.0),
            peak_current_a: Some(2.0),
        };
        let points = [at("at a", 20.0, 2.5), at("at b", 30.0, 1.0)];
        let verdict = ratings.verdict(&points, 0);
        assert_eq!(verdict.outcome, Outcome::Outside);
        let [volts, amps] = verdict.checks.as_slice() else {
            panic!("{verdict:?}")
        };
        // Equal to its rating is within.
        assert_eq!(
            (volts.outcome, volts.margin_db),
            (Outcome::Within, Some(0.0))
        );
        assert!(volts.reason.contains("30 V at b"), "{}", volts.reason);
        assert!(amps.reason.contains("2.5 A at a"), "{}", amps.reason);
        assert!((amps.margin_db.unwrap() - 20.0 * (2.0f64 / 2.5).log10()).abs() < 1e-12);
        assert_eq!(ratings.outcome(&points[0].stress), Outcome::Outside);
        assert_eq!(ratings.outcome(&points[1].stress), Outcome::Within);
    }

    #[test]
    fn what_was_not_solved_is_not_within() {
        let ratings = Ratings {
            peak_voltage_v: Some(30.0),
            peak_current_a: None,
        };
        let points = [at("here", 20.0, 2.5)];
        assert_eq!(ratings.verdict(&points, 0).outcome, Outcome::Within);
        assert_eq!(ratings.verdict(&points, 1).outcome, Outcome::Undecided);
        assert_eq!(ratings.verdict(&[], 3).outcome, Outcome::Undecided);
        let beyond = [at("here", 40.0, 2.5)];
        assert_eq!(ratings.verdict(&beyond, 1).outcome, Outcome::Outside);
    }
}
