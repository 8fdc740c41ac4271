//! From targets to a design: which search, and what came of it.

use super::best_effort::best_effort;
use super::budget::Budget;
use super::error::DesignError;
use super::ideal::{HIGHEST_RATIO, Ideal, highest_frequency_hz};
use super::parts::Parts;
use super::zero::{curved_f, ideal_of, zero};
use super::{Choice, Targets};
use crate::orbit::Orbit;
use crate::stage::Stage;

/// A designed stage with what it does.
#[derive(Debug, Clone)]
pub struct Design {
    /// What was asked.
    pub targets: Targets,
    /// The lossless stage with sinusoidal current that the search started from; none for a best effort
    /// where no such stage exists.
    pub ideal: Option<Ideal>,
    /// What was found.
    pub parts: Parts,
    /// The stage that these parts make.
    pub stage: Stage,
    /// Its orbit.
    pub orbit: Orbit,
    /// Whether voltage and slope are zero at closing.
    pub zero: Zero,
    /// The highest carrier at which the device's capacitance still fits an ideal stage of this duty, power
    /// and supply, Hz; none without a device capacitance.
    pub highest_frequency_hz: Option<f64>,
}

/// How the search for zero voltage and zero slope ended.
#[derive(Debug, Clone, PartialEq)]
pub enum Zero {
    /// Both are zero, and the power is as wanted.
    Reached {
        /// Orbits solved on the way.
        evaluations: usize,
    },
    /// Not possible with this device: the most efficient stage of the wanted power instead.
    BestEffort(BestEffort),
}

/// Why there is no zero.
#[derive(Debug, Clone, PartialEq)]
pub enum BestEffort {
    /// The device brings more capacitance than the stage may have, F.
    TooMuchCapacitance {
        /// The most that the stage may have, F; none where no ideal stage exists at all.
        needed_f: Option<f64>,
        /// What the device has, F.
        device_f: f64,
    },
}

/// Designs a stage for `targets`.
///
/// # Errors
/// [`DesignError`].
pub fn design(targets: &Targets) -> Result<Design, DesignError> {
    let budget = Budget::new();
    match within(targets, &budget) {
        Err(_) if budget.is_spent() => Err(DesignError::RanOut),
        found => found,
    }
}

fn within(targets: &Targets, budget: &Budget) -> Result<Design, DesignError> {
    if targets.choice == Choice::DeviceCapacitance {
        return around_device(targets, budget);
    }
    let (ideal, parts, evaluations) = match nominal(targets, budget) {
        // A curved device may leave no room for any fixed capacitance at all.
        Err(DesignError::NotFound { .. }) if targets.device.drain_curve.is_some() => {
            return best_effort(targets, None, None, budget);
        }
        other => other?,
    };
    if parts.drain_f < targets.device.drain_f * (1.0 - 1e-9) {
        return best_effort(targets, Some(ideal), Some(parts), budget);
    }
    finish(
        targets,
        Some(ideal),
        parts,
        Zero::Reached { evaluations },
        budget,
    )
}

/// The ideal stage, and the parts of the real one.
fn nominal(targets: &Targets, budget: &Budget) -> Result<(Ideal, Parts, usize), DesignError> {
    let ideal = ideal_of(targets)?;
    let (parts, evaluations) = zero(targets, &ideal, budget)?;
    Ok((ideal, parts, evaluations))
}

/// The feed ratio at which the drain capacitance is the device's own: it rises with the ratio.
fn around_device(targets: &Targets, budget: &Budget) -> Result<Design, DesignError> {
    let device_f = targets.device.drain_f;
    let mut evaluations = 0;
    let mut at = |ratio: f64| {
        let choice = if ratio > 0.0 {
            Choice::FeedRatio(ratio)
        } else {
            Choice::Choke
        };
        let here = Targets {
            choice,
            ..targets.clone()
        };
        let (ideal, parts, solved) = nominal(&here, budget)?;
        evaluations += solved;
        Ok((ideal, parts))
    };
    let (_, choke): (Ideal, Parts) = at(0.0)?;
    let whole_f = choke.drain_f + curved_f(targets);
    if device_f < choke.drain_f {
        return Err(DesignError::TooLittleCapacitance {
            given_f: device_f,
            least_f: choke.drain_f,
        });
    }
    // The highest ratio that still has a stage.
    let mut low = 0.3;
    let mut high = HIGHEST_RATIO;
    let mut largest = None;
    while high > low {
        if let Ok(found) = at(high) {
            largest = Some(found);
            break;
        }
        high -= 0.1;
    }
    let Some((mut ideal, mut parts)) = largest else {
        return Err(DesignError::NotFound {
            residual: f64::INFINITY,
        });
    };
    if parts.drain_f < device_f {
        return best_effort(targets, Some(ideal), Some(parts), budget);
    }
    for _ in 0..50 {
        let middle = 0.5 * (low + high);
        let Ok(found) = at(middle) else { break };
        (ideal, parts) = found;
        if parts.drain_f > device_f {
            high = middle;
        } else {
            low = middle;
        }
        if (parts.drain_f - device_f).abs() < 1e-12 * whole_f {
            break;
        }
    }
    let residual = (parts.drain_f - device_f).abs() / whole_f;
    if residual > 1e-9 {
        return Err(DesignError::NotFound { residual });
    }
    parts.drain_f = device_f;
    finish(
        targets,
        Some(ideal),
        parts,
        Zero::Reached { evaluations },
        budget,
    )
}

pub(super) fn finish(
    targets: &Targets,
    ideal: Option<Ideal>,
    parts: Parts,
    zero: Zero,
    budget: &Budget,
) -> Result<Design, DesignError> {
    let stage = parts.stage(targets);
    let orbit = budget.orbit_of(&stage).ok_or(DesignError::NotFound {
        residual: f64::INFINITY,
    })?;
    let device_f = targets.device.drain_f;
    let whole_f = device_f + curved_f(targets);
    let highest_frequency_hz = (whole_f > 0.0)
        .then(|| highest_frequency_hz(targets.output_w, targets.supply_v, targets.duty, whole_f))
        .flatten();
    Ok(Design {
        targets: targets.clone(),
        ideal,
        parts,
        stage,
        orbit,
        zero,
        highest_frequency_hz,
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::design::PartLosses;
    use crate::stage::{Arrangement, Device, Diode, DrainCurve, Junction, Switch};

    fn targets(choice: Choice) -> Targets {
        Targets {
            title: "a test".into(),
            frequency_hz: 100e6,
            output_w: 5.0,
            supply_v: 6.0,
            duty: 0.5,
            load_ohm: 50.0,
            loaded_q: 5.0,
            choice,
            device: Device {
                switch: Switch {
                    closed_ohm: 0.1,
                    open_ohm: f64::INFINITY,
                    knee: None,
                    diode: None,
                    arrangement: Arrangement::Single,
                },
                drain_f: 20e-12,
                drain_curve: None,
                gate_coupling_f: 0.0,
                gate: None,
            },
            losses: PartLosses {
                feed_ohm: 0.03,
                inductor_q: 100.0,
                capacitor_q: 400.0,
            },
        }
    }

    #[test]
    fn every_choice_reaches_zero_and_its_power() {
        for choice in [
            Choice::FeedRatio(1.2),
            Choice::NoExcess,
            Choice::Choke,
            Choice::FeedRatio(1.6),
        ] {
            let mut targets = targets(choice);
            for (load_ohm, loaded_q) in [(50.0, 5.0), (4.0, 5.0), (50.0, 2.5)] {
                (targets.load_ohm, targets.loaded_q) = (load_ohm, loaded_q);
                let design =
                    design(&targets).unwrap_or_else(|e| panic!("{choice:?} {load_ohm}: {e}"));
                assert!(matches!(design.zero, Zero::Reached { .. }));
                assert!(design.orbit.closing_v.abs() < 1e-8 * 6.0);
                assert!((design.orbit.output_w - 5.0).abs() < 1e-8);
                assert!(design.orbit.efficiency > 0.8, "{}", design.orbit.efficiency);
            }
        }
    }

    #[test]
    fn the_device_can_be_the_whole_drain_capacitance() {
        let mut targets = targets(Choice::DeviceCapacitance);
        targets.device.drain_f = 140e-12;
        let found = design(&targets).unwrap();
        assert!(matches!(found.zero, Zero::Reached { .. }));
        assert_eq!(found.parts.drain_f, 140e-12);
        assert!(found.orbit.closing_v.abs() < 1e-8 * 6.0);
        targets.device.drain_f = 1e-12;
        assert!(matches!(
            design(&targets),
            Err(DesignError::TooLittleCapacitance { .. })
        ));
        targets.device.drain_f = 500e-12;
        let found = design(&targets).unwrap();
        assert!(matches!(found.zero, Zero::BestEffort(_)));
    }

    #[test]
    fn too_large_a_device_gets_the_best_that_is_left() {
        let mut targets = targets(Choice::Choke);
        targets.device.drain_f = 150e-12;
        let design = design(&targets).unwrap();
        let Zero::BestEffort(BestEffort::TooMuchCapacitance {
            needed_f: Some(needed_f),
            ..
        }) = design.zero
        else {
            panic!("{:?}", design.zero)
        };
        assert!(needed_f < 150e-12);
        assert!(
            (design.orbit.output_w / 5.0 - 1.0).abs() < 0.01,
            "{}",
            design.orbit.output_w
        );
        // Off nominal, but not hopeless: closing loses charge, yet most power reaches the load.
        assert!(design.orbit.efficiency > 0.5, "{}", design.orbit.efficiency);
    }

    #[test]
    #[cfg_attr(
        debug_assertions,
        ignore = "takes the whole budget of the search: seconds in release only"
    )]
    fn a_search_that_costs_too_much_is_given_up() {
        // Found by the long search: it took minutes and ended at a hundred-thousandth of the wanted power.
        let mut targets = targets(Choice::NoExcess);
        targets.frequency_hz = 23900365.752584938;
        targets.output_w = 0.2515941993541345;
        targets.supply_v = 109.15902676518132;
        targets.duty = 0.16595710758785437;
        targets.load_ohm = 1.0147672312738028;
        targets.loaded_q = 10.13517972662202;
        targets.device.drain_f = 2.6399745550554938e-14;
        targets.device.drain_curve = Some(DrainCurve::Junction(Junction {
            zero_bias_f: 1.4471006581175108e-13,
            potential_v: 3.4235106248820752,
            grading: 2.9128429088851977,
        }));
        targets.device.switch.closed_ohm = 0.00014328202242899272;
        targets.device.switch.diode = Some(Diode {
            drop_v: 1.673894355011263,
            ohm: 2.0435292485833254,
        });
        targets.losses.feed_ohm = 0.032799070079387115;
        targets.losses.inductor_q = 4.455357409679698;
        match design(&targets) {
            Ok(design) => assert!((design.orbit.output_w / targets.output_w - 1.0).abs() < 0.01),
            Err(error) => println!("{error}"),
        }
    }
}
