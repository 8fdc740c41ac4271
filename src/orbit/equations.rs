//! State equations for every position that the switches of a circuit can be in.

use std::f64::consts::{PI, TAU};

use nalgebra::{DMatrix, DVector};
use num_complex::Complex64;

use super::circuit::{Circuit, End, Owner};
use super::linear::Position;
use super::network::{HARMONICS, NetworkError};
use super::reduce::{Contacts, Reduced, Subspace, without_idle};
use super::schedule::Closed;

/// A circuit with its state equations in every position of its switches, over one and the same state.
#[derive(Debug, Clone)]
pub struct Equations {
    pub circuit: Circuit,
    /// All open first. The switches of one leg are never closed together.
    pub positions: Vec<(Closed, Reduced)>,
}

impl Equations {
    /// The state equations of `circuit`.
    ///
    /// # Errors
    /// [`NetworkError::Undetermined`].
    pub fn new(circuit: Circuit) -> Result<Self, NetworkError> {
        let subspace = Subspace::of(&circuit).ok_or(NetworkError::Undetermined)?;
        let mut closed = Vec::new();
        let mut positions = Vec::new();
        for position in 0..1 << circuit.contacts.len() {
            if shorts_a_leg(&circuit, position) {
                continue;
            }
            let equations = subspace.equations(&circuit, Contacts::At(position));
            positions.push(equations.ok_or(NetworkError::Undetermined)?);
            closed.push(position);
        }
        let positions = without_idle(positions)
            .filter(|all| all.iter().all(|reduced| reduced.a.nrows() > 0))
            .ok_or(NetworkError::Undetermined)?;
        Ok(Self {
            circuit,
            positions: closed.into_iter().zip(positions).collect(),
        })
    }

    /// Number of independent states.
    pub fn states(&self) -> usize {
        self.positions
            .first()
            .map_or(0, |(_, reduced)| reduced.a.nrows())
    }

    /// Everything about each position that does not depend on supply or widths.
    ///
    /// # Errors
    /// [`NetworkError::LosslessResonance`].
    pub fn prepared(&self) -> Result<Vec<Position>, NetworkError> {
        self.positions
            .iter()
            .map(|(closed, reduced)| {
                prepared(*closed, reduced).map_err(|harmonic| match harmonic {
                    None => NetworkError::Undetermined,
                    Some(harmonic) => NetworkError::LosslessResonance {
                        position: self.describe(*closed),
                        harmonic,
                    },
                })
            })
            .collect()
    }

    /// The position in words, to follow "with".
    fn describe(&self, closed: Closed) -> String {
        let contacts = &self.circuit.contacts;
        if let [_] = contacts[..] {
            let word = if closed == 0 { "open" } else { "closed" };
            return format!("the switch {word}");
        }
        let names: Vec<String> = (0..contacts.len())
            .filter(|index| closed & (1 << index) != 0)
            .map(|index| contact_name(&self.circuit, index))
            .collect();
        if names.is_empty() {
            "all switches open".to_owned()
        } else {
            format!("the {} switch closed", names.join(" and the "))
        }
    }
}

/// What a contact is called among several: `upper`, `second`, `first lower`.
pub fn contact_name(circuit: &Circuit, index: usize) -> String {
    let Some(contact) = circuit.contacts.get(index) else {
        return String::new();
    };
    let leg = ["first", "second"][contact.leg.min(1)];
    let alone = circuit
        .contacts
        .iter()
        .filter(|other| other.leg == contact.leg)
        .count()
        == 1;
    let end = match contact.end {
        End::Ground => "lower",
        End::Rail(_) => "upper",
    };
    match (circuit.legs.len(), alone) {
        (1, _) => end.to_owned(),
        (_, true) => leg.to_owned(),
        (_, false) => format!("{leg} {end}"),
    }
}

fn shorts_a_leg(circuit: &Circuit, closed: Closed) -> bool {
    (0..circuit.legs.len()).any(|leg| {
        let at_leg = circuit
            .contacts
            .iter()
            .enumerate()
            .filter(|(index, contact)| contact.leg == leg && closed & (1 << index) != 0);
        at_leg.count() > 1
    })
}

/// The harmonic at which it rings without loss where it does; `None` there without a load.
fn prepared(closed: Closed, reduced: &Reduced) -> Result<Position, Option<usize>> {
    let load = reduced
        .resistors
        .iter()
        .find(|(owner, ..)| *owner == Owner::Load)
        .map(|(_, ohm, row)| row * *ohm)
        .ok_or(None)?;
    let (states, inputs) = reduced.b.shape();
    let mut harmonics = Vec::with_capacity(HARMONICS);
    for harmonic in 1..=HARMONICS {
        // r (jk - A) = load row: the transpose is solved for.
        let order = Complex64::new(0.0, harmonic as f64);
        let system = DMatrix::from_fn(states, states, |i, j| {
            let diagonal = if i == j { order } else { Complex64::ZERO };
            diagonal - reduced.a[(j, i)]
        });
        let right = load.rows(0, states).map(Complex64::from);
        let size = right.iter().map(|x| x.norm()).fold(0.0, f64::max);
        let row: DVector<Complex64> = system
            .lu()
            .solve(&right)
            .filter(|row| {
                row.iter()
                    .all(|x| x.is_finite() && x.norm() < 1e12 * size.max(1e-30))
            })
            .ok_or(Some(harmonic))?;
        let forced = (0..inputs).map(|input| {
            row.iter()
                .zip(reduced.b.column(input).iter())
                .map(|(r, b)| r * b)
                .sum::<Complex64>()
                + load[states + input]
        });
        harmonics.push(row.iter().copied().chain(forced).collect());
    }
    let fastest = reduced
        .a
        .complex_eigenvalues()
        .iter()
        .map(|e| e.im.abs())
        .fold(0.0, f64::max);
    Ok(Position {
        closed,
        a: reduced.a.clone(),
        b: reduced.b.clone(),
        legs: reduced.legs.clone(),
        load,
        supply: reduced.supply.clone(),
        resistors: reduced.resistors.clone(),
        harmonics,
        cycles: fastest * TAU / (2.0 * PI),
    })
}
