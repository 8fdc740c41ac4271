//! Values of options that are more than words.

use crate::study::By;
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

/// What the output is taken from.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, clap::ValueEnum)]
pub enum ByChoice {
    /// The stage settles at once to the orbit of its controls
    #[default]
    Map,
    /// The stage is integrated carrier cycle by carrier cycle, its memory included
    Replay,
    /// By replay, with what the map says beside it
    Both,
}

impl ByChoice {
    /// As the study takes it.
    pub fn by(self) -> By {
        match self {
            Self::Map => By::Map,
            Self::Replay => By::Replay,
            Self::Both => By::Both,
        }
    }

    /// The option that asks for it on a command line; nothing for the default.
    pub fn option(self) -> &'static str {
        match self {
            Self::Map => "",
            Self::Replay => " --by replay",
            Self::Both => " --by both",
        }
    }
}
