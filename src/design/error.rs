//! Why there is no design.

use crate::units::show;

/// Why there is no design.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum DesignError {
    /// No ideal stage for the free choice and duty.
    #[error(
        "no class E stage exists for duty {duty} and {choice}: change the duty or the free choice"
    )]
    NoIdeal {
        /// As given.
        duty: f64,
        /// In words.
        choice: String,
    },
    /// The device has less capacitance than even a choke needs.
    #[error(
        "the device's {} are too little to be the whole drain capacitance: even a choke needs {}; use another free choice, which adds a capacitor",
        show(*.given_f, "F", 4),
        show(*.least_f, "F", 4)
    )]
    TooLittleCapacitance {
        /// What the device has, F.
        given_f: f64,
        /// What a choke needs, F.
        least_f: f64,
    },
    /// The search did not come to an end.
    #[error(
        "no stage with zero voltage and slope was found (residual {residual:.1e}): a higher loaded Q, lower losses or another free choice may help"
    )]
    NotFound {
        /// Largest residual, in supplies and parts of the power.
        residual: f64,
    },
    /// The device's capacitance leaves no zero voltage, and the search for the next best missed the power.
    #[error(
        "with the device's capacitance no stage of {} was found; the nearest delivers {}: a lower frequency, another power or a smaller device may help",
        show(*.wanted_w, "W", 4),
        show(*.found_w, "W", 4)
    )]
    PowerMissed {
        /// W
        wanted_w: f64,
        /// W
        found_w: f64,
    },
    /// The search was given up: most of what it tried has no orbit, or takes very long.
    #[error(
        "no design was found within the work limit of the search: a curved device far from what the power and the supply ask for, or an extreme loaded Q"
    )]
    RanOut,
}
