//! What one interval does to the state, in the fastest form that is exact.

use nalgebra::{DMatrix, DVector};

use super::Form;
use super::modal::Modal;
use super::nested::Nested;
use crate::math::flow::Flow;
use crate::math::small::{Column, Square};

/// Largest difference between the modal form and scaling and squaring, relative to the largest entry of what each
/// column becomes (1 at least). Eigenvectors of condition 1e4 multiply rounding of 1e-16 by that much at most; twelve
/// orders leave a hundredfold reserve to the 1e-10 to which a constant track must equal its orbit.
const AGREEMENT: f64 = 2e-12;

/// The same for what the supply's slope does, which cancels by the square of the slowest rate. A slope of 1 V/rad on
/// a supply of 1 V is a hundred times what a supply does that crosses its range within 16 carrier cycles.
const SLOPE_AGREEMENT: f64 = 100.0 * AGREEMENT;

/// Intervals at which the two are compared, rad.
const PROBES_RAD: [f64; 6] = [1e-3, 0.03, 0.7, 2.9, 4.4, 6.2];

/// `z' = G z` with `z` = (state, supply, slope, zeros).
#[derive(Debug, Clone)]
pub enum Propagator<const M: usize> {
    /// A product of table entries for each mode.
    Modal(Box<Modal<M>>),
    /// A product of stored propagators, where eigenvectors are ill-conditioned.
    Nested(Box<Nested<M>>),
}

impl<const M: usize> Propagator<M> {
    /// Of `y' = a y + b u`, in the asked form, or the fastest that holds.
    pub fn new(a: &DMatrix<f64>, b: &DVector<f64>, form: Form) -> Self {
        let generator = generator(a, b);
        if form == Form::Fastest
            && let Some(modal) = Modal::new(a, b)
            && agrees(&modal, &generator, a.nrows())
        {
            return Self::Modal(Box::new(modal));
        }
        Self::Nested(Box::new(Nested::new(&generator)))
    }

    /// `z` after `length_rad`, at most one period.
    #[inline]
    pub fn advance(&self, z: &Column<M>, length_rad: f64) -> Column<M> {
        match self {
            Self::Modal(modal) => modal.advance(z, length_rad),
            Self::Nested(nested) => nested.advance(z, length_rad),
        }
    }

    /// Condition number of the eigenvectors where the modal form is used.
    pub fn condition(&self) -> Option<f64> {
        match self {
            Self::Modal(modal) => Some(modal.condition()),
            Self::Nested(_) => None,
        }
    }
}

/// The generator over (state, supply, slope), row by row.
pub fn generator<const M: usize>(a: &DMatrix<f64>, b: &DVector<f64>) -> Square<M> {
    let states = a.nrows();
    let mut generator = Square::ZERO;
    for i in 0..states {
        for j in 0..states {
            generator.0[i][j] = a[(i, j)];
        }
        generator.0[i][states] = b[i];
    }
    generator.0[states][states + 1] = 1.0;
    generator
}

fn agrees<const M: usize>(modal: &Modal<M>, generator: &Square<M>, states: usize) -> bool {
    PROBES_RAD.iter().all(|&length_rad| {
        let flow = Flow::new(generator, length_rad, 0);
        (0..states + 2).all(|column| {
            let mut z = [0.0; M];
            z[column] = 1.0;
            let (a, b) = (modal.advance(&z, length_rad), flow.end(&z));
            let size = b.iter().fold(1.0f64, |size, x| size.max(x.abs()));
            let allowed = match column > states {
                true => size * SLOPE_AGREEMENT,
                false => size * AGREEMENT,
            };
            a.iter().zip(&b).all(|(a, b)| (a - b).abs() <= allowed)
        })
    })
}
