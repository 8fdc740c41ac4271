//! Which numbers a key takes.

use crate::units::{self, Dimension};

/// Which numbers are allowed.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Range {
    /// Any finite number.
    Any,
    /// Greater than zero.
    Positive,
    /// Zero or greater.
    NotNegative,
    /// From the first to the second, both included.
    Within(f64, f64),
    /// Between the first and the second, neither included.
    Between(f64, f64),
    /// Greater than the first, up to and including the second.
    UpTo(f64, f64),
}

impl Range {
    /// True where `value` is allowed.
    pub fn holds(self, value: f64) -> bool {
        value.is_finite()
            && match self {
                Self::Any => true,
                Self::Positive => value > 0.0,
                Self::NotNegative => value >= 0.0,
                Self::Within(low, high) => (low..=high).contains(&value),
                Self::Between(low, high) => low < value && value < high,
                Self::UpTo(low, high) => low < value && value <= high,
            }
    }

    pub(super) fn describe(self, dimension: Dimension) -> String {
        let unit = dimension.unit();
        let show = |value: f64| units::show(value, unit, 6);
        let limits = match self {
            Self::Any => String::new(),
            Self::Positive => format!(", greater than {}", show(0.0)),
            Self::NotNegative => format!(", {} or more", show(0.0)),
            Self::Within(low, high) => format!(", {} to {}", show(low), show(high)),
            Self::Between(low, high) => {
                format!(", more than {} and less than {}", show(low), show(high))
            }
            Self::UpTo(low, high) => {
                format!(", more than {} and at most {}", show(low), show(high))
            }
        };
        format!(
            "{}{limits}, such as {}",
            dimension.name(),
            dimension.example()
        )
    }
}
