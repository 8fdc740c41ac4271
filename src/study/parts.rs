//! Where the energy of a check went, as factors of the efficiency.

use crate::transmit::Energy;

/// Factors whose product is the efficiency. Absent where the map knows no current.
///
/// ```text
/// efficiency = modulator * stage * driver * combiner * filter
/// ```
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct EfficiencyParts {
    /// What reaches the stage over what the modulator draws.
    pub modulator: Option<f64>,
    /// What the stage delivers over what it draws from its supply.
    pub stage: Option<f64>,
    /// What modulator and driver draw without the driver's part.
    pub driver: Option<f64>,
    /// What leaves the combiner over what the stages deliver into it; 1 without one.
    pub combiner: f64,
    /// What leaves a filter behind the stage over what enters it; 1 without one.
    pub filter: f64,
}

impl EfficiencyParts {
    /// Of the sums of a run.
    pub fn of(energy: &Energy) -> Self {
        let known = |part: f64| part.is_finite().then_some(part);
        let drawn_w = energy.modulator_w + energy.driver_w;
        Self {
            modulator: known(energy.stage_w / energy.modulator_w),
            stage: known(energy.generated_w / energy.stage_w),
            driver: known(energy.modulator_w / drawn_w),
            combiner: energy.filter_w / energy.generated_w,
            filter: energy.output_w / energy.filter_w,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_factors_make_the_efficiency() {
        let energy = Energy {
            samples: 10,
            output_w: 3.0,
            generated_w: 4.0,
            filter_w: 3.2,
            stage_w: 5.0,
            modulator_w: 6.5,
            driver_w: 0.5,
        };
        let parts = EfficiencyParts::of(&energy);
        let product = parts.modulator.unwrap()
            * parts.stage.unwrap()
            * parts.driver.unwrap()
            * parts.combiner
            * parts.filter;
        assert!((product - energy.efficiency()).abs() < 1e-15);
        assert_eq!((parts.combiner, parts.stage), (0.8, Some(0.8)));
        assert_eq!(parts.filter, 3.0 / 3.2);
        let unknown = Energy {
            stage_w: f64::NAN,
            modulator_w: f64::NAN,
            ..energy
        };
        assert_eq!(EfficiencyParts::of(&unknown).stage, None);
    }
}
