//! Values of options that are more than words.

use crate::units::{self, Dimension};

/// A parser of quantities with units for clap.
pub fn quantity(
    dimension: Dimension,
) -> impl Fn(&str) -> Result<f64, String> + Clone + Send + Sync + 'static {
    move |text| {
        let value = units::parse(text, dimension).map_err(|error| {
            format!(
                "{error}; allowed: {dimension}, such as {}",
                dimension.example()
            )
        })?;
        if dimension.is_plausible(value) {
            Ok(value)
        } else {
            Err(format!("allowed: {}", dimension.plausible_text()))
        }
    }
}
