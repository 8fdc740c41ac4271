//! What the switch may stand, as options of `solve` and `map`.

use super::arguments::quantity;
use super::{Ending, Failure};
use crate::units::Dimension;
use crate::verdict::{Outcome, Ratings, Verdict};

/// Ratings of the device that every orbit is held against.
#[derive(Debug, Clone, clap::Args)]
#[command(next_help_heading = "Ratings of the switch (exit code 1 beyond them)")]
pub struct RatingOptions {
    /// Drain voltage that the device stands, such as 30V
    #[arg(long, value_name = "V", value_parser = quantity(Dimension::Voltage))]
    peak_voltage: Option<f64>,

    /// Switch current that the device stands, such as 2A
    #[arg(long, value_name = "A", value_parser = quantity(Dimension::Current))]
    peak_current: Option<f64>,
}

impl RatingOptions {
    /// The ratings.
    ///
    /// # Errors
    /// A rating that is not more than 0.
    pub fn ratings(&self) -> Result<Ratings, Failure> {
        for (option, value) in [
            ("--peak-voltage", self.peak_voltage),
            ("--peak-current", self.peak_current),
        ] {
            if let Some(value) = value.filter(|value| *value <= 0.0) {
                let text = format!("{option}: given {value}; allowed: more than 0");
                return Err(Failure::new(text));
            }
        }
        Ok(Ratings {
            peak_voltage_v: self.peak_voltage,
            peak_current_a: self.peak_current,
        })
    }
}

/// How a command ends with `verdict`.
pub fn ending(verdict: &Verdict) -> Ending {
    match verdict.outcome {
        Outcome::Within => Ending::Within,
        Outcome::Outside => Ending::Outside,
        Outcome::Undecided => Ending::Undecided,
    }
}
