//! Class E with a sinusoidal output current and a lossless switch, to start the exact search from.
//!
//! The open switch sees drain capacitance, feed inductor and the sinusoid; between closings the drain obeys
//! a second-order equation whose solution is a sum of a constant, sine and cosine at `q` and at the carrier
//! (M. Acar, A. J. Annema, B. Nauta, "Analytical design equations for class-E power amplifiers", IEEE Trans.
//! Circuits Syst. I, 2007). Zero voltage and zero slope at closing leave one amplitude and one phase, from
//! which every part follows.

use std::f64::consts::TAU;

use num_complex::Complex64;

use crate::math::newton::{Search, Stop, search};

/// The ideal stage in units of its load resistance.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Ideal {
    /// `1 / (w sqrt(L C))`; 0 for a choke.
    pub feed_ratio: f64,
    /// `P R / V^2`.
    pub power: f64,
    /// `w C R`.
    pub capacitance: f64,
    /// `w L / R`; infinite for a choke.
    pub feed: f64,
    /// `X / R` of the excess series reactance.
    pub excess: f64,
}

/// The highest feed ratio on offer: published sets end here.
pub const HIGHEST_RATIO: f64 = 1.8;

/// A feed ratio below this stands for a choke: its ripple is below 1e-4.
const CHOKE: f64 = 1e-3;

/// Steps of the integrals over the open interval.
const STEPS: usize = 2000;

impl Ideal {
    /// The ideal stage for `feed_ratio` and `duty`; `None` where none exists.
    ///
    /// Unknown are the amplitude `p = w L I / V` of the output current and its phase `phi`; time is the carrier's
    /// angle from opening, `0..2 pi (1 - duty)`, and voltages are in supplies.
    pub fn new(feed_ratio: f64, duty: f64) -> Option<Self> {
        let q = feed_ratio.max(CHOKE);
        let open = TAU * (1.0 - duty);
        let closed = TAU * duty;
        let stop = Stop {
            residual: 1e-12,
            steps: 200,
        };
        // Several starts: the wanted solution has positive power and a positive drain voltage.
        for phi in [-0.5, -1.5, 0.5, 1.5, -2.5, 2.5] {
            for scale in [1.0, 0.3, 3.0] {
                let p0 = scale * (1.0 + 1.0 / (q * q));
                let found = search(&[p0.ln(), phi], stop, |x| {
                    let (v, slope) = drain(q, x[0].exp(), x[1], closed, open);
                    Some(vec![v, slope])
                });
                if let Search::Converged { at, .. } = found
                    && let Some(ideal) = Self::from_current(q, at[0].exp(), at[1], closed, open)
                {
                    let choke = feed_ratio < CHOKE;
                    return Some(Self {
                        feed_ratio: if choke { 0.0 } else { ideal.feed_ratio },
                        feed: if choke { f64::INFINITY } else { ideal.feed },
                        ..ideal
                    });
                }
            }
        }
        None
    }

    /// The ideal stage without excess reactance; `None` where none exists.
    pub fn no_excess(duty: f64) -> Option<Self> {
        Self::where_falling(duty, |ideal| ideal.excess)
    }

    /// The ideal stage whose `w C V^2 / P` is `figure`; `None` where no feed gives it.
    pub fn with_capacitance(figure: f64, duty: f64) -> Option<Self> {
        Self::where_falling(duty, |ideal| figure - ideal.capacitance_figure())
    }

    /// `w C V^2 / P`: it rises with the feed ratio.
    pub fn capacitance_figure(&self) -> f64 {
        self.capacitance / self.power
    }

    /// The stage at whose feed ratio the falling `value` is zero.
    fn where_falling(duty: f64, value: impl Fn(&Self) -> f64) -> Option<Self> {
        let at = |ratio: f64| Self::new(ratio, duty);
        let (mut low, mut high) = (0.0, HIGHEST_RATIO);
        if value(&at(low)?) < 0.0 {
            return None;
        }
        while at(high).is_none_or(|ideal| value(&ideal) > 0.0) {
            high -= 0.05;
            if high <= low {
                return None;
            }
        }
        while high - low > 1e-13 {
            let middle = 0.5 * (low + high);
            if middle == low || middle == high {
                break;
            }
            if value(&at(middle)?) > 0.0 {
                low = middle;
            } else {
                high = middle;
            }
        }
        at(low)
    }

    fn from_current(q: f64, p: f64, phi: f64, closed: f64, open: f64) -> Option<Self> {
        let step = open / STEPS as f64;
        // Fundamental of the drain voltage against the output current I sin(t + phi), by Simpson's rule.
        let (mut phasor, mut lowest) = (Complex64::ZERO, 0.0f64);
        for index in 0..=STEPS {
            let angle = index as f64 * step;
            let weight = match index {
                0 | STEPS => 1.0,
                odd if odd % 2 == 1 => 4.0,
                _ => 2.0,
            };
            let (v, _) = drain(q, p, phi, closed, angle);
            lowest = lowest.min(v);
            phasor += weight * v * Complex64::cis(-angle);
        }
        phasor *= step / 3.0 / std::f64::consts::PI;
        // I sin(t + phi) has the phasor -j e^(j phi).
        let current = Complex64::cis(phi) * Complex64::new(0.0, -1.0);
        // In units of V / (w L): current p, so the impedance is phasor / (p current) times w L.
        let impedance = phasor / (p * current);
        // w L = 1 in these units: R = impedance.re, w C = q^2.
        let (resistance, reactance) = (impedance.re, impedance.im);
        let physical = resistance > 0.0 && p > 0.0 && lowest > -1e-6;
        physical.then(|| Self {
            feed_ratio: q,
            power: p * p * resistance * resistance / 2.0,
            capacitance: resistance / (q * q),
            feed: 1.0 / resistance,
            excess: reactance / resistance,
        })
    }
}

/// Drain voltage (in supplies) and slope at `angle` after opening.
///
/// With currents in `V / (w L)`, closed: `i_L' = 1`. Open: `v'' / q^2 + v = 1 - p cos(t + phi)`, from
/// `C v' = i_L - i_o`, `L i_L' = 1 - v`, `i_o = p sin(t + phi)` and `w^2 L C = 1 / q^2`. The feed current at closing
/// is set by zero slope there, `i_L = i_o(closing)`, and has risen by `closed` at opening.
fn drain(q: f64, p: f64, phi: f64, closed: f64, angle: f64) -> (f64, f64) {
    let open = TAU - closed;
    let at_closing = p * (open + phi).sin();
    let at_opening = at_closing + closed;
    // v(0) = 0, v'(0) = q^2 (i_L - i_o)
    let slope_start = q * q * (at_opening - p * phi.sin());
    let particular = p * q * q / (1.0 - q * q);
    // Near q = 1 the two oscillations merge; a ratio a hair off is the same stage.
    let particular = if particular.is_finite() {
        particular
    } else {
        p * 1e9
    };
    let a = -1.0 - particular * phi.cos();
    let b = (slope_start + particular * phi.sin()) / q;
    let v = 1.0 + a * (q * angle).cos() + b * (q * angle).sin() + particular * (angle + phi).cos();
    let slope =
        q * (b * (q * angle).cos() - a * (q * angle).sin()) - particular * (angle + phi).sin();
    (v, slope)
}

/// The highest carrier at which an ideal stage of `duty` delivers `output_w` from `supply_v` with a device of
/// `capacitance_f`, Hz: at a feed ratio of [`HIGHEST_RATIO`], past which currents and losses climb steeply.
/// `None` where no ideal stage of this duty exists.
pub fn highest_frequency_hz(
    output_w: f64,
    supply_v: f64,
    duty: f64,
    capacitance_f: f64,
) -> Option<f64> {
    let ratios = (0..=36)
        .rev()
        .map(|step| HIGHEST_RATIO - 0.05 * f64::from(36 - step));
    let ideal = ratios
        .into_iter()
        .find_map(|ratio| Ideal::new(ratio, duty))?;
    let susceptance = ideal.capacitance_figure() * output_w / (supply_v * supply_v);
    Some(susceptance / (TAU * capacitance_f))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn near(given: f64, expected: f64, tolerance: f64) {
        assert!(
            (given / expected - 1.0).abs() < tolerance,
            "{given} {expected}"
        );
    }

    #[test]
    fn a_choke_gives_the_classic_set() {
        // F. H. Raab, "Idealized operation of the class E tuned power amplifier", IEEE Trans. Circuits
        // Syst., Dec. 1977. The choke is a ratio of 1e-3: its ripple leaves 1e-5.
        let pi = std::f64::consts::PI;
        let ideal = Ideal::new(0.0, 0.5).unwrap();
        near(ideal.power, 8.0 / (pi * pi + 4.0), 2e-5);
        near(ideal.capacitance, 8.0 / (pi * (pi * pi + 4.0)), 2e-5);
        near(ideal.excess, pi * (pi * pi - 4.0) / 16.0, 2e-5);
    }

    #[test]
    fn no_excess_reactance_gives_the_exact_set() {
        // A. Grebennikov, High Frequency Electronics, July 2004, quotes 1.365, 0.732, 0.685 and q = 1.412;
        // tests/reference/closed_forms.json holds the same set solved exactly with SciPy 1.17.1: 1.36324,
        // 0.73326, 0.68408.
        let ideal = Ideal::no_excess(0.5).unwrap();
        near(ideal.power, 1.36324, 1e-5);
        near(ideal.feed, 0.73326, 1e-5);
        near(ideal.capacitance, 0.68408, 1e-5);
        assert!(ideal.excess.abs() < 1e-6);
    }

    #[test]
    fn the_capacitance_figure_finds_its_ratio() {
        // Grebennikov: a highest frequency of 0.0798 P / (C V^2) without excess reactance, and the exact
        // 0.07987 of tests/reference/closed_forms.json.
        let figure = Ideal::no_excess(0.5).unwrap().capacitance_figure();
        near(figure / TAU, 0.0798, 1e-3);
        near(
            Ideal::with_capacitance(figure, 0.5).unwrap().feed_ratio,
            1.41196,
            1e-4,
        );
        // q = 1.8 of the same file: 0.12817.
        near(
            highest_frequency_hz(1.0, 1.0, 0.5, 1.0).unwrap(),
            0.128_166_3,
            1e-5,
        );
        assert_eq!(Ideal::with_capacitance(1e3, 0.5), None);
        assert_eq!(Ideal::with_capacitance(1e-3, 0.5), None);
    }

    #[test]
    fn agrees_with_scipy_over_ratio_and_duty() {
        // tests/reference/closed_forms.json, solved with SciPy 1.17.1.
        let document: serde_json::Value =
            serde_json::from_str(include_str!("../../tests/reference/closed_forms.json")).unwrap();
        let mut compared = 0;
        for entry in document["figures"]["any_feed"].as_array().unwrap() {
            let number = |key: &str| entry[key].as_f64().unwrap();
            let Some(ideal) = Ideal::new(number("q"), number("duty")) else {
                continue;
            };
            near(ideal.power, number("power"), 1e-7);
            near(ideal.capacitance, number("wrc"), 1e-7);
            near(ideal.feed, number("wl_over_r"), 1e-7);
            assert!((ideal.excess - number("excess")).abs() < 1e-7);
            compared += 1;
        }
        assert!(compared >= 60, "{compared}");
    }
}
