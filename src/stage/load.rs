//! The end of the ladder: a resistance, with a reactance where it is not matched.

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::Element;

/// A reactance below this part of the reference is none: `sin` of half a turn is not zero in floating point.
const NO_REACTANCE: f64 = 1e-12;

/// The end of the ladder: `ohm`, which takes the power, in series with `reactance`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Load {
    /// The real part, ohm.
    pub ohm: f64,
    /// What stands in series with it, if anything.
    pub reactance: Option<Element>,
    /// What reflection coefficients refer to, ohm.
    pub reference_ohm: f64,
}

/// The reflection coefficient's magnitude for a standing-wave ratio `vswr` of 1 or more: `(s - 1)/(s + 1)`.
pub fn magnitude_of_vswr(vswr: f64) -> f64 {
    (vswr - 1.0) / (vswr + 1.0)
}

/// The element that has the reactance `ohm` at `frequency_hz`: an inductor where it is positive, a capacitor where
/// it is negative.
pub fn reactance_element(ohm: f64, frequency_hz: f64) -> Option<Element> {
    let angular_hz = TAU * frequency_hz;
    if ohm > 0.0 {
        Some(Element::Inductor(ohm / angular_hz))
    } else if ohm < 0.0 {
        Some(Element::Capacitor(-1.0 / (angular_hz * ohm)))
    } else {
        None
    }
}

impl Load {
    /// A resistance, which is its own reference.
    pub fn matched(ohm: f64) -> Self {
        Self {
            ohm,
            reactance: None,
            reference_ohm: ohm,
        }
    }

    /// The load with the reflection coefficient `gamma`, of magnitude less than 1, against `reference_ohm` at
    /// `frequency_hz`:
    ///
    /// ```text
    /// R = R0 (1 - |g|^2) / |1 - g|^2        X = R0 2 Im(g) / |1 - g|^2
    /// ```
    ///
    /// from `Z = R0 (1 + g)/(1 - g)`. The reactance is one element, and harmonics meet that element.
    pub fn reflecting(gamma: Complex64, reference_ohm: f64, frequency_hz: f64) -> Self {
        let below = (Complex64::ONE - gamma).norm_sqr();
        let reactance_ohm = reference_ohm * 2.0 * gamma.im / below;
        let reactance_ohm = if reactance_ohm.abs() <= NO_REACTANCE * reference_ohm {
            0.0
        } else {
            reactance_ohm
        };
        Self {
            ohm: reference_ohm * (1.0 - gamma.norm_sqr()) / below,
            reactance: reactance_element(reactance_ohm, frequency_hz),
            reference_ohm,
        }
    }

    /// The reactance at `frequency_hz`, ohm.
    pub fn reactance_ohm(&self, frequency_hz: f64) -> f64 {
        let angular_hz = TAU * frequency_hz;
        match self.reactance {
            Some(Element::Inductor(henry)) => angular_hz * henry,
            Some(Element::Capacitor(farad)) => -1.0 / (angular_hz * farad),
            Some(Element::Resistor(_)) | None => 0.0,
        }
    }

    /// The impedance at `frequency_hz`, ohm.
    pub fn impedance_ohm(&self, frequency_hz: f64) -> Complex64 {
        Complex64::new(self.ohm, self.reactance_ohm(frequency_hz))
    }

    /// The reflection coefficient against the reference at `frequency_hz`.
    pub fn reflection(&self, frequency_hz: f64) -> Complex64 {
        let impedance = self.impedance_ohm(frequency_hz);
        (impedance - self.reference_ohm) / (impedance + self.reference_ohm)
    }

    /// The same reflection coefficient at `frequency_hz` against another reference, ohm.
    #[must_use]
    pub fn with_reference(&self, reference_ohm: f64, frequency_hz: f64) -> Self {
        if self.ohm == self.reference_ohm {
            // A resistance with a stated reactance, which stays what it is.
            return Self {
                ohm: reference_ohm,
                reference_ohm,
                ..*self
            };
        }
        Self::reflecting(self.reflection(frequency_hz), reference_ohm, frequency_hz)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn no_reflection_is_the_reference_to_the_bit() {
        let load = Load::reflecting(Complex64::ZERO, 47.3, 1e8);
        assert_eq!(load, Load::matched(47.3));
    }

    #[test]
    fn impedances_by_hand_and_back() {
        // A standing-wave ratio of 2 reaches from half to twice the reference, both real.
        let third = magnitude_of_vswr(2.0);
        for (turn, ohm) in [(0.0, 100.0), (0.5, 25.0)] {
            let gamma = Complex64::from_polar(third, turn * TAU);
            let load = Load::reflecting(gamma, 50.0, 1e8);
            assert!((load.ohm - ohm).abs() < 1e-12 * ohm, "{load:?}");
            assert_eq!(load.reactance, None);
        }
        for degrees in (5..360).step_by(10) {
            let gamma = Complex64::from_polar(0.6, f64::from(degrees).to_radians());
            let load = Load::reflecting(gamma, 50.0, 1e8);
            assert!((load.reflection(1e8) - gamma).norm() < 1e-14);
            assert_eq!(
                degrees < 180,
                matches!(load.reactance, Some(Element::Inductor(_)))
            );
            let other = load.with_reference(75.0, 1e8);
            assert!((other.reflection(1e8) - gamma).norm() < 1e-13);
        }
    }
}
