//! Everything about one topology of the switches that an interval needs.
//!
//! The Fourier integral of the load voltage over an interval, with `z` = (state, supply, slope) and `z' = G z`:
//!
//! ```text
//! integral of v exp(-jk x) dx = -[r z exp(-jk x)],     r (jk - G) = load row
//! integral of x v exp(-jk x) dx = -[(x r + q) z exp(-jk x)],     q (jk - G) = r
//! ```
//!
//! and the supply's energy, with its current `i = q . y + k u`, `u' = s`:
//!
//! ```text
//! integral of u i = [p1 . y u + p2 . y s] + (k - b . p1) int u^2 - (b . p2) int u s,   A^T p1 = q,   A^T p2 = -p1
//! ```

use nalgebra::{DMatrix, DVector};
use num_complex::Complex64;

use super::error::ReplayError;
use super::forms::{Form, Former, SupplyIntegrals};
use super::propagator::{Propagator, generator};
use super::{Account, MAX_HARMONICS, Setup};
use crate::math::flow::Flow;
use crate::math::small::{Column, Square, dot};
use crate::orbit::{Owner, Reduced};

/// Powers of [`Account::Losses`]: load, switch, feed, ladder, and what an ideal choke gives to the drain.
pub const POWERS: usize = 5;

/// The supply's energy form loses more than five of sixteen digits past this ratio to the current's own row.
const LARGEST_ROW: f64 = 1e10;

#[derive(Debug, Clone)]
pub struct Topology<const M: usize> {
    pub propagator: Propagator<M>,
    /// Real and imaginary parts of `r` and `q` at the carrier, `p1` and `p2`; entry by entry of `z`.
    rows: [[f64; 6]; M],
    /// `r` at the harmonics that were asked for beside the carrier.
    higher: Vec<[Column<M>; 2]>,
    supply: SupplyEnergy,
    powers: Powers<M>,
}

#[derive(Debug, Clone, Copy)]
enum SupplyEnergy {
    /// Not asked for, or an ideal choke's, which is known without the state.
    None,
    /// By `p1`, `p2` and these factors of the two supply integrals.
    Rows { square: f64, slope: f64 },
    /// From second moments.
    Moments,
}

#[derive(Debug, Clone)]
enum Powers<const M: usize> {
    None,
    Forms(Box<[Form<M>; POWERS]>),
    /// Where a part rings or holds charge without loss: second moments, interval by interval. Weights and pairs of rows.
    Moments(Box<Moments<M>>),
}

#[derive(Debug, Clone)]
struct Moments<const M: usize> {
    states: usize,
    generator: Square<M>,
    supply: Column<M>,
    powers: [Vec<(f64, Column<M>, Column<M>)>; POWERS],
}

/// What the ends of an interval give.
#[derive(Debug, Clone, Copy, Default)]
pub struct Ends {
    pub output: [f64; 2],
    pub tilt: [f64; 2],
    pub energy: [f64; 2],
}

impl<const M: usize> Topology<M> {
    pub fn new(reduced: &Reduced, setup: &Setup, choke: bool) -> Result<Self, ReplayError> {
        let n = reduced.a.nrows();
        let b = column(&reduced.b);
        let load = reduced
            .resistors
            .iter()
            .find(|(owner, ..)| *owner == Owner::Load)
            .map(|(_, ohm, row)| row * *ohm)
            .ok_or(ReplayError::NeverSettles)?;
        let load: Vec<Complex64> = load.iter().copied().map(Complex64::from).collect();
        let output = |harmonic: usize| fourier_row(reduced, &load, harmonic);
        let first = output(1)?;
        let second = fourier_row(reduced, &first, 1)?;
        let mut rows = [[0.0; 6]; M];
        for (row, (first, second)) in rows.iter_mut().zip(first.iter().zip(&second)) {
            (row[0], row[1]) = (first.re, first.im);
            (row[2], row[3]) = (second.re, second.im);
        }
        let higher = (2..=setup.harmonics.clamp(1, MAX_HARMONICS))
            .map(|harmonic| {
                let row = output(harmonic)?;
                let mut parts = [[0.0; M]; 2];
                for (at, entry) in row.iter().enumerate() {
                    (parts[0][at], parts[1][at]) = (entry.re, entry.im);
                }
                Ok(parts)
            })
            .collect::<Result<_, ReplayError>>()?;
        let by_moments = || Powers::Moments(Box::new(Moments::new(reduced)));
        let mut powers = match setup.account {
            Account::Losses => match forms(reduced) {
                Some(forms) => Powers::Forms(Box::new(forms)),
                None => by_moments(),
            },
            _ => Powers::None,
        };
        let mut supply = SupplyEnergy::None;
        if setup.account != Account::Envelope && !choke {
            supply = match supply_rows(reduced) {
                Some((p1, p2)) => {
                    for i in 0..n {
                        (rows[i][4], rows[i][5]) = (p1[i], p2[i]);
                    }
                    SupplyEnergy::Rows {
                        square: reduced.supply[n] - b.dot(&p1),
                        slope: -b.dot(&p2),
                    }
                }
                None => {
                    powers = by_moments();
                    SupplyEnergy::Moments
                }
            };
        }
        Ok(Self {
            propagator: Propagator::new(&reduced.a, &column(&reduced.b), setup.form),
            rows,
            higher,
            supply,
            powers,
        })
    }

    /// Rows at `z`: their difference between an interval's ends is what the interval gives.
    #[inline]
    pub fn at(&self, z: &Column<M>, input: f64, slope: f64) -> Ends {
        let mut sums = [0.0; 6];
        for (row, z) in self.rows.iter().zip(z) {
            for (sum, row) in sums.iter_mut().zip(row) {
                *sum += row * z;
            }
        }
        Ends {
            output: [sums[0], sums[1]],
            tilt: [sums[2], sums[3]],
            energy: [sums[4] * input, sums[5] * slope],
        }
    }

    /// `r z` at harmonic `index + 2`.
    #[inline]
    pub fn higher_at(&self, index: usize, z: &Column<M>) -> Complex64 {
        self.higher.get(index).map_or(Complex64::ZERO, |[re, im]| {
            Complex64::new(dot(re, z), dot(im, z))
        })
    }

    /// The supply's energy that is not in [`Topology::at`].
    #[inline]
    pub fn supply_rest(&self, integrals: &SupplyIntegrals) -> f64 {
        match self.supply {
            SupplyEnergy::Rows { square, slope } => {
                square * integrals.square + slope * integrals.slope
            }
            _ => 0.0,
        }
    }

    /// Adds the powers' integrals from `start` to `end`, and the supply's where it comes from moments.
    pub fn powers(
        &self,
        start: &Column<M>,
        end: &Column<M>,
        integrals: &SupplyIntegrals,
        length_rad: f64,
        sums: &mut [f64; POWERS],
    ) -> f64 {
        match &self.powers {
            Powers::None => 0.0,
            Powers::Forms(forms) => {
                for (sum, form) in sums.iter_mut().zip(forms.iter()) {
                    *sum += form.integral(start, end, integrals);
                }
                0.0
            }
            Powers::Moments(moments) => {
                let moment = Flow::new(&moments.generator, length_rad, 0).second_moment(start);
                for (sum, parts) in sums.iter_mut().zip(&moments.powers) {
                    for (weight, left, right) in parts {
                        *sum += weight * dot(left, &moment.apply(right));
                    }
                }
                match self.supply {
                    SupplyEnergy::Moments => moment
                        .0
                        .get(moments.states)
                        .map_or(0.0, |row| dot(row, &moments.supply)),
                    _ => 0.0,
                }
            }
        }
    }
}

impl<const M: usize> Moments<M> {
    fn new(reduced: &Reduced) -> Self {
        let padded = |row: &DVector<f64>| {
            let mut column = [0.0; M];
            for (entry, value) in column.iter_mut().zip(row.iter()) {
                *entry = *value;
            }
            column
        };
        Self {
            states: reduced.a.nrows(),
            generator: generator(&reduced.a, &column(&reduced.b)),
            supply: padded(&reduced.supply),
            powers: power_rows(reduced).map(|parts| {
                parts
                    .iter()
                    .map(|(weight, left, right)| (*weight, padded(left), padded(right)))
                    .collect()
            }),
        }
    }
}

/// The row `x` with `x (jk - G) = right` over state, supply and slope; `right` may leave out the slope.
fn fourier_row(
    reduced: &Reduced,
    right: &[Complex64],
    harmonic: usize,
) -> Result<Vec<Complex64>, ReplayError> {
    let n = reduced.a.nrows();
    let order = Complex64::new(0.0, harmonic as f64);
    let system = DMatrix::from_fn(n, n, |row, column| {
        let diagonal = if row == column {
            order
        } else {
            Complex64::ZERO
        };
        diagonal - reduced.a[(column, row)]
    });
    let at = |i: usize| right.get(i).copied().unwrap_or(Complex64::ZERO);
    let states = DVector::from_fn(n, |i, _| at(i));
    let row = system
        .lu()
        .solve(&states)
        .ok_or(ReplayError::NeverSettles)?;
    let forced: Complex64 = row.iter().zip(reduced.b.iter()).map(|(r, b)| r * b).sum();
    let of_supply = (forced + at(n)) / order;
    let of_slope = (of_supply + at(n + 1)) / order;
    Ok(row.iter().copied().chain([of_supply, of_slope]).collect())
}

/// `p1` and `p2`; `None` where the topology holds something without loss.
fn supply_rows(reduced: &Reduced) -> Option<(DVector<f64>, DVector<f64>)> {
    let n = reduced.a.nrows();
    let current = reduced.supply.rows(0, n).into_owned();
    let transposed = reduced.a.transpose().lu();
    let first = transposed.solve(&current)?;
    let second = transposed.solve(&-&first)?;
    let largest = first.amax().max(second.amax());
    (largest <= LARGEST_ROW * current.amax().max(1e-300)).then_some((first, second))
}

/// The only input's column.
fn column(b: &DMatrix<f64>) -> DVector<f64> {
    b.column(0).into_owned()
}

type Parts = Vec<(f64, DVector<f64>, DVector<f64>)>;

/// Each power as weights and pairs of rows.
fn power_rows(reduced: &Reduced) -> [Parts; POWERS] {
    let of = |wanted: fn(&Owner) -> bool| -> Parts {
        reduced
            .resistors
            .iter()
            .filter(|(owner, ..)| wanted(owner))
            .map(|(_, ohm, row)| (*ohm, row.clone(), row.clone()))
            .collect()
    };
    let n = reduced.a.nrows();
    let mut input = DVector::zeros(n + 1);
    input[n] = 1.0;
    [
        of(|owner| *owner == Owner::Load),
        of(|owner| matches!(owner, Owner::Contact(_))),
        of(|owner| *owner == Owner::Feed),
        of(|owner| matches!(owner, Owner::Rung(_))),
        vec![(
            1.0,
            input,
            reduced
                .legs
                .first()
                .cloned()
                .unwrap_or_else(|| DVector::zeros(n + 1)),
        )],
    ]
}

fn forms<const M: usize>(reduced: &Reduced) -> Option<[Form<M>; POWERS]> {
    let b = column(&reduced.b);
    let former = Former::new(&reduced.a, &b);
    let forms: Option<Vec<Form<M>>> = power_rows(reduced)
        .iter()
        .map(|parts| former.form(parts))
        .collect();
    forms?.try_into().ok()
}
