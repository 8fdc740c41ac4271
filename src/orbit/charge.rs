//! Charge on the drain over its voltage: a fixed part, and a junction or a table.
//!
//! ```text
//! junction   C = C0 (1 + v/phi)^-m        q = C0 phi ((1 + v/phi)^(1-m) - 1) / (1 - m)
//!            below v = -phi/2: C continues along its tangent, q is its integral
//! table      C a monotone cubic through the points, constant outside them; q its integral from 0 V
//! ```

use crate::stage::DrainCurve;

/// The part of the junction's potential at which the law is left for its tangent (common practice in circuit
/// simulation: the law itself has a pole at -1).
const TANGENT_AT: f64 = -0.5;

/// Charge in units of capacitance times volts.
#[derive(Debug, Clone)]
pub struct Charge {
    fixed: f64,
    curve: Curve,
}

#[derive(Debug, Clone)]
enum Curve {
    None,
    Junction {
        zero_bias: f64,
        potential: f64,
        grading: f64,
        /// Where the tangent begins: voltage, charge, capacitance, slope.
        tangent: [f64; 4],
    },
    Table {
        pieces: Vec<Piece>,
        /// Capacitance and charge at the last point.
        end: [f64; 3],
    },
}

/// A cubic of capacitance over one piece of the table, from `volt` on.
#[derive(Debug, Clone, Copy)]
struct Piece {
    volt: f64,
    charge: f64,
    /// Capacitance is the sum of `c[k] (v - volt)^k`.
    c: [f64; 4],
}

impl Charge {
    /// `fixed` and, `scale` times, what `curve` says in F.
    pub fn new(fixed: f64, curve: Option<&DrainCurve>, scale: f64) -> Self {
        let curve = match curve {
            None => Curve::None,
            Some(DrainCurve::Junction(junction)) => {
                let (c0, phi, m) = (
                    junction.zero_bias_f * scale,
                    junction.potential_v,
                    junction.grading,
                );
                let volt = TANGENT_AT * phi;
                let (q, c) = law(c0, phi, m, volt);
                let slope = -m * c / (phi + volt);
                Curve::Junction {
                    zero_bias: c0,
                    potential: phi,
                    grading: m,
                    tangent: [volt, q, c, slope],
                }
            }
            Some(DrainCurve::Table(points)) => table(points, scale),
        };
        Self { fixed, curve }
    }

    /// Charge and capacitance at `volt`.
    pub fn at(&self, volt: f64) -> (f64, f64) {
        let (q, c) = match &self.curve {
            Curve::None => (0.0, 0.0),
            Curve::Junction {
                zero_bias,
                potential,
                grading,
                tangent: [at, charge, capacitance, slope],
            } => {
                if volt < *at {
                    let d = volt - at;
                    (
                        charge + d * (capacitance + 0.5 * d * slope),
                        capacitance + d * slope,
                    )
                } else {
                    law(*zero_bias, *potential, *grading, volt)
                }
            }
            Curve::Table { pieces, end } => {
                let first = pieces.first().copied();
                match first {
                    Some(piece) if volt <= piece.volt => {
                        (piece.charge + piece.c[0] * (volt - piece.volt), piece.c[0])
                    }
                    _ if volt >= end[0] => (end[2] + end[1] * (volt - end[0]), end[1]),
                    _ => {
                        let index = pieces.partition_point(|piece| piece.volt <= volt);
                        pieces[index.saturating_sub(1)].at(volt)
                    }
                }
            }
        };
        (q + self.fixed * volt, c + self.fixed)
    }

    /// The voltage at which the charge is `charge`: Newton's method held in a bracket.
    pub fn voltage(&self, charge: f64, guess: f64) -> f64 {
        let (mut low, mut high) = (guess, guess);
        let mut width = 1.0f64.max(guess.abs());
        while self.at(low).0 > charge && width < 1e30 {
            low -= width;
            width *= 2.0;
        }
        width = 1.0f64.max(guess.abs());
        while self.at(high).0 < charge && width < 1e30 {
            high += width;
            width *= 2.0;
        }
        let mut v = guess;
        for _ in 0..200 {
            let (q, c) = self.at(v);
            if q > charge {
                high = v;
            } else {
                low = v;
            }
            let newton = v - (q - charge) / c;
            let next = if newton >= low && newton <= high {
                newton
            } else {
                0.5 * (low + high)
            };
            if (next - v).abs() <= 1e-16 * v.abs() {
                return next;
            }
            v = next;
        }
        v
    }
}

fn law(c0: f64, phi: f64, m: f64, volt: f64) -> (f64, f64) {
    let log = (volt / phi).ln_1p();
    let rest = 1.0 - m;
    // (u^(1-m) - 1)/(1-m) without loss where m is near 1.
    let q = if rest.abs() < 1e-9 {
        log
    } else {
        (rest * log).exp_m1() / rest
    };
    (c0 * phi * q, c0 * (-m * log).exp())
}

impl Piece {
    fn at(&self, volt: f64) -> (f64, f64) {
        let d = volt - self.volt;
        let [c0, c1, c2, c3] = self.c;
        (
            self.charge + d * (c0 + d * (c1 / 2.0 + d * (c2 / 3.0 + d * c3 / 4.0))),
            c0 + d * (c1 + d * (c2 + d * c3)),
        )
    }
}

fn table(points: &[(f64, f64)], scale: f64) -> Curve {
    let x: Vec<f64> = points.iter().map(|point| point.0).collect();
    let y: Vec<f64> = points.iter().map(|point| point.1 * scale).collect();
    let slope = crate::math::monotone::slopes(&x, &y);
    let mut charge = 0.0;
    let mut pieces = Vec::with_capacity(x.len());
    for i in 0..x.len().saturating_sub(1) {
        let width = x[i + 1] - x[i];
        let chord = (y[i + 1] - y[i]) / width;
        let c = [
            y[i],
            slope[i],
            (3.0 * chord - 2.0 * slope[i] - slope[i + 1]) / width,
            (slope[i] + slope[i + 1] - 2.0 * chord) / (width * width),
        ];
        let piece = Piece {
            volt: x[i],
            charge,
            c,
        };
        charge = piece.at(x[i + 1]).0;
        pieces.push(piece);
    }
    let end = match (x.last(), y.last()) {
        (Some(x), Some(y)) => [*x, *y, charge],
        _ => [0.0; 3],
    };
    let mut curve = Curve::Table { pieces, end };
    // Count the charge from 0 V.
    let zero = Charge {
        fixed: 0.0,
        curve: curve.clone(),
    }
    .at(0.0)
    .0;
    if let Curve::Table { pieces, end } = &mut curve {
        for piece in pieces {
            piece.charge -= zero;
        }
        end[2] -= zero;
    }
    curve
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::stage::Junction;

    fn laws() -> Vec<Charge> {
        let junction = |grading| {
            DrainCurve::Junction(Junction {
                zero_bias_f: 3.0,
                potential_v: 0.8,
                grading,
            })
        };
        let table = DrainCurve::Table(vec![(0.0, 9.0), (1.0, 5.0), (4.0, 2.5), (20.0, 2.0)]);
        vec![
            Charge::new(0.7, Some(&junction(0.45)), 1.0),
            Charge::new(0.7, Some(&junction(1.0)), 1.0),
            Charge::new(0.1, Some(&junction(1.6)), 2.0),
            Charge::new(0.2, Some(&table), 1.0),
        ]
    }

    #[test]
    fn capacitance_is_the_slope_of_charge_and_both_are_continuous() {
        for law in laws() {
            let mut before = law.at(-3.0);
            for step in 1..=2800 {
                let v = -3.0 + f64::from(step) * 0.01;
                let here = law.at(v);
                // Simpson's rule over the step.
                let rise = 0.01 / 6.0 * (before.1 + 4.0 * law.at(v - 0.005).1 + here.1);
                assert!((here.0 - before.0 - rise).abs() < 3e-7, "{v}: {law:?}");
                assert!((here.1 - before.1).abs() < 0.8, "{v}");
                before = here;
            }
            assert!(law.at(0.0).0.abs() < 1e-15);
        }
    }

    #[test]
    fn voltage_inverts_charge() {
        for law in laws() {
            for v in [-2.5, -0.4, -1e-9, 0.0, 0.3, 5.0, 30.0] {
                let back = law.voltage(law.at(v).0, 1.0);
                assert!((back - v).abs() < 1e-13 * v.abs().max(0.1), "{v} {back}");
            }
        }
    }

    #[test]
    fn junction_charge_matches_hand_worked_values() {
        // C0 = 3, phi = 0.8, m = 1/2 at v = 2.4: u = 4, C = 1.5, q = 3 x 0.8 x 2 (2 - 1) = 4.8.
        let curve = DrainCurve::Junction(Junction {
            zero_bias_f: 3.0,
            potential_v: 0.8,
            grading: 0.5,
        });
        let (q, c) = Charge::new(0.0, Some(&curve), 1.0).at(2.4);
        assert!((q - 4.8).abs() < 1e-14 && (c - 1.5).abs() < 1e-14);
    }
}
