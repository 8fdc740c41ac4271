//! From the wanted magnitude to the control's fraction, with a floor against deep notches.

/// How the floor is met. `m` is the wanted magnitude and `f` the floor, both fractions of full range.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Shape {
    /// `max(m, f)`: straight above the floor, with a corner.
    Corner,
    /// `sqrt(m^2 + f^2)`: never straight, no corner.
    Hyperbola,
    /// `m + f exp(-m/f)`: straight well above the floor, flat at zero.
    Exponential,
}

/// A shape and its floor.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Shaping {
    /// Which curve.
    pub shape: Shape,
    /// The lowest fraction of full range, 0 (no floor) to less than 1.
    pub floor: f64,
}

impl Shaping {
    /// The control's fraction for the wanted magnitude `m`, 0 or more.
    pub fn apply(&self, m: f64) -> f64 {
        let f = self.floor;
        if f <= 0.0 {
            return m;
        }
        match self.shape {
            Shape::Corner => m.max(f),
            Shape::Hyperbola => m.hypot(f),
            Shape::Exponential => m + f * (-m / f).exp(),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn floors_hold_and_full_range_is_nearly_straight() {
        for shape in [Shape::Corner, Shape::Hyperbola, Shape::Exponential] {
            let shaping = Shaping { shape, floor: 0.05 };
            assert_eq!(shaping.apply(0.0), 0.05, "{shape:?}");
            assert!(
                (shaping.apply(1.0) - 1.0).abs() < 0.05f64.powi(2),
                "{shape:?}"
            );
            let mut last = 0.0;
            for step in 0..=1000 {
                let value = shaping.apply(f64::from(step) / 1000.0);
                assert!(value >= last && value >= 0.05, "{shape:?} at {step}");
                last = value;
            }
            assert_eq!(Shaping { shape, floor: 0.0 }.apply(0.3), 0.3);
        }
    }
}
