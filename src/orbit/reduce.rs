//! From branches to state equations.
//!
//! Capacitor voltages and inductor currents are known at any instant; node voltages, resistor and
//! capacitor currents follow from Kirchhoff's laws: `T w = H x + g u`. Where capacitors form a loop
//! or inductors a cutset, `T` is singular: each left null vector is a constraint `K x = 0` on the
//! states, and its derivative restores the rank (an index-2 network, see e.g. C.-W. Ho, A. E. Ruehli,
//! P. A. Brennan, "The modified nodal approach to network analysis", IEEE Trans. Circuits Syst., 1975
//! for the tableau). The states are then the coordinates of the constrained subspace.
//!
//! States are scaled so that half the sum of their squares is the stored energy. The system matrix is
//! then skew-symmetric plus a dissipative part and its exponential never exceeds one.

use nalgebra::{DMatrix, DVector};

use super::circuit::{Branch, Circuit, End, GROUND, Input, Normalised, Owner};
use super::schedule::Closed;

/// Singular values below this fraction of the largest count as zero. The tableau's entries are at most
/// one in magnitude, so rounding is near 1e-15.
const RANK_TOLERANCE: f64 = 1e-12;

/// Entries of a matrix below this part of its largest one may be rounding.
const ROUNDING: f64 = 1e-14;

/// Refinements of the solution of the network equations. Each one takes the error down by the ratio of rounding
/// to the smallest singular value, which is 1e-4 or better within [`RANK_TOLERANCE`].
const REFINEMENTS: usize = 2;

/// `dy/dtheta = A y + b u`; every quantity of interest is `row . (y, u)`.
#[derive(Debug, Clone)]
pub struct Reduced {
    /// n x n
    pub a: DMatrix<f64>,
    /// n x m, one column for each input.
    pub b: DMatrix<f64>,
    /// Voltage of each switched node, n + m.
    pub legs: Vec<DVector<f64>>,
    /// Power drawn from the supply over its voltage, n + m.
    pub supply: DVector<f64>,
    /// Every resistor: owner, resistance, current row of n + m.
    pub resistors: Vec<(Owner, f64, DVector<f64>)>,
}

/// The constrained subspace of the states, the same in all positions of the switches: closing one puts a resistor
/// beside the capacitance of its node and adds no constraint.
#[derive(Debug, Clone)]
pub struct Subspace {
    /// Constraint rows over the scaled states.
    constraints: DMatrix<f64>,
    /// Orthonormal columns.
    basis: DMatrix<f64>,
}

/// The equations of one position of the switches before reduction.
struct Tableau {
    t: DMatrix<f64>,
    h: DMatrix<f64>,
    g: DMatrix<f64>,
    /// Scaled state derivatives as rows over `w`.
    derivative: DMatrix<f64>,
    node: Vec<Option<usize>>,
    /// Currents out of the voltage sources, each with its part of the supply.
    sources: Vec<(usize, f64)>,
    resistors: Vec<(Owner, f64, usize)>,
}

/// What the contacts of a circuit do.
#[derive(Debug, Clone, Copy)]
pub enum Contacts {
    /// None of them is there.
    Absent,
    /// Each stands with its resistance, closed or open.
    At(Closed),
}

impl Tableau {
    fn new(circuit: &Circuit, contacts: Contacts) -> Self {
        let mut branches = circuit.branches.clone();
        if let Contacts::At(closed) = contacts {
            for (index, contact) in circuit.contacts.iter().enumerate() {
                if let Some(ohm) = contact.ohm(closed & (1 << index) != 0) {
                    let leg = circuit.legs[contact.leg];
                    // Current flows out of the rail into the leg, and out of the leg into ground.
                    let (from, to) = match contact.end {
                        End::Ground => (leg, GROUND),
                        End::Rail(rail) => (rail.node, leg),
                    };
                    branches.push(Branch {
                        from,
                        to,
                        element: Normalised::Resistor(ohm, Owner::Contact(index)),
                    });
                }
            }
        }
        let voltages = circuit.nodes - 1;
        let own_current = |branch: &&Branch| !matches!(branch.element, Normalised::Inductor(_));
        let currents = branches.iter().filter(own_current).count();
        let states = branches
            .iter()
            .filter(|b| !matches!(b.element, Normalised::Resistor(..)))
            .count();
        let rails: &[_] = match &circuit.input {
            Input::Voltage(rails) => rails,
            Input::Current(_) => &[],
        };
        let size = voltages + currents + rails.len();

        let mut tableau = Self {
            t: DMatrix::zeros(size, size),
            h: DMatrix::zeros(size, states),
            g: DMatrix::zeros(size, circuit.input.count()),
            derivative: DMatrix::zeros(states, size),
            node: (0..circuit.nodes).map(|node| node.checked_sub(1)).collect(),
            sources: Vec::new(),
            resistors: Vec::new(),
        };
        let mut current = voltages;
        let mut state = 0;
        for branch in &branches {
            let ends = [(branch.from, 1.0), (branch.to, -1.0)];
            let ends = ends.map(|(node, sign)| (tableau.node[node], sign));
            let ends = ends
                .into_iter()
                .filter_map(|(node, sign)| Some((node?, sign)));
            match branch.element {
                Normalised::Inductor(l) => {
                    let scale = 1.0 / l.sqrt();
                    for (node, sign) in ends {
                        tableau.h[(node, state)] = -sign * scale;
                        tableau.derivative[(state, node)] = sign * scale;
                    }
                    state += 1;
                }
                Normalised::Capacitor(c) => {
                    let scale = 1.0 / c.sqrt();
                    for (node, sign) in ends {
                        tableau.t[(node, current)] += sign;
                        tableau.t[(current, node)] += sign;
                    }
                    tableau.h[(current, state)] = scale;
                    tableau.derivative[(state, current)] = scale;
                    state += 1;
                    current += 1;
                }
                Normalised::Resistor(ohm, owner) => {
                    // v - R i = 0, divided by R where R is large, so that no entry exceeds one.
                    let divisor = ohm.max(1.0);
                    for (node, sign) in ends {
                        tableau.t[(node, current)] += sign;
                        tableau.t[(current, node)] += sign / divisor;
                    }
                    tableau.t[(current, current)] -= ohm / divisor;
                    tableau.resistors.push((owner, ohm, current));
                    current += 1;
                }
            }
        }
        for (at, rail) in (voltages + currents..).zip(rails) {
            let node = rail.node - 1;
            tableau.t[(node, at)] = -1.0;
            tableau.t[(at, node)] = 1.0;
            tableau.g[(at, 0)] = rail.share;
            tableau.sources.push((at, rail.share));
        }
        if let Input::Current(chokes) = &circuit.input {
            for (input, choke) in chokes.iter().enumerate() {
                tableau.g[(choke.node - 1, input)] = 1.0;
            }
        }
        tableau
    }

    /// Rows `K` with `K x = 0` for every state the network can be in.
    fn constraints(&self) -> Option<DMatrix<f64>> {
        Some(left_null(&self.t, RANK_TOLERANCE)?.transpose() * &self.h)
    }
}

impl Subspace {
    /// The subspace of `circuit`; `None` where the decomposition does not converge.
    pub fn of(circuit: &Circuit) -> Option<Self> {
        let constraints = Tableau::new(circuit, Contacts::Absent).constraints()?;
        let states = constraints.ncols();
        if constraints.nrows() == 0 {
            return Some(Self {
                constraints,
                basis: DMatrix::identity(states, states),
            });
        }
        let basis = left_null(&constraints.transpose(), RANK_TOLERANCE)?;
        Some(Self { constraints, basis })
    }

    /// State equations with the contacts as told. `None` where the network has no unique solution.
    pub fn equations(&self, circuit: &Circuit, contacts: Contacts) -> Option<Reduced> {
        let tableau = Tableau::new(circuit, contacts);
        let inputs = circuit.input.count();
        let (size, extra) = (tableau.t.nrows(), self.constraints.nrows());
        let states = self.basis.ncols();
        let mut left = DMatrix::zeros(size + extra, size);
        left.rows_mut(0, size).copy_from(&tableau.t);
        let rates = &self.constraints * &tableau.derivative;
        for row in 0..extra {
            let scale = rates.row(row).amax();
            left.row_mut(size + row)
                .copy_from(&(rates.row(row) / scale));
        }
        let mut right = DMatrix::zeros(size + extra, states + inputs);
        right
            .view_mut((0, 0), (size, states))
            .copy_from(&(&tableau.h * &self.basis));
        right
            .view_mut((0, states), (size, inputs))
            .copy_from(&tableau.g);
        let svd = left.clone().svd(true, true);
        let limit = RANK_TOLERANCE * svd.singular_values.max();
        if svd.singular_values.min() <= limit {
            return None;
        }
        let mut solution = svd.solve(&right, limit).ok()?;
        // A switch of next to no resistance makes the smallest singular value small, and the decomposition's
        // rounding divided by it large: refining against the equations themselves takes it out again.
        for _ in 0..REFINEMENTS {
            solution += svd.solve(&(&right - &left * &solution), limit).ok()?;
        }
        let rate = self.basis.transpose() * &tableau.derivative * &solution;
        let row = |index: usize| solution.row(index).transpose();
        let mut supply = DVector::zeros(states + inputs);
        match &circuit.input {
            Input::Voltage(_) => {
                for &(source, share) in &tableau.sources {
                    supply += share * row(source);
                }
            }
            Input::Current(chokes) => {
                for (input, choke) in chokes.iter().enumerate() {
                    supply[states + input] = choke.share;
                }
            }
        }
        Some(Reduced {
            a: rate.columns(0, states).into_owned(),
            b: rate.columns(states, inputs).into_owned(),
            legs: circuit.legs.iter().map(|leg| row(leg - 1)).collect(),
            supply,
            resistors: tableau
                .resistors
                .iter()
                .map(|&(owner, ohm, at)| (owner, ohm, row(at)))
                .collect(),
        })
    }
}

/// Takes out what never moves: a combination of states that no position of the switches and no input can
/// change, such as the charge trapped between two series capacitors with only coils between them. A stage that
/// started from rest holds none of it; left in, it would make the periodic state ambiguous.
pub fn without_idle(positions: Vec<Reduced>) -> Option<Vec<Reduced>> {
    let (first, others) = positions.split_first()?;
    let states = first.a.nrows();
    let mut idle = left_null(&joined(first), RANK_TOLERANCE)?;
    for other in others {
        if idle.ncols() == 0 {
            break;
        }
        // Of these, the combinations that this position does not touch either.
        let touched = idle.transpose() * joined(other);
        idle = &idle * left_null(&touched, 1e-9)?;
    }
    if idle.ncols() == 0 {
        return Some(positions);
    }
    // The states that are free to move: the null space of a square matrix that spans the idle ones.
    let basis = left_null(&(&idle * idle.transpose()), 1e-9)?;
    let kept = basis.ncols();
    let project = |reduced: &Reduced| {
        let row = |row: &DVector<f64>| {
            let inputs = row.len() - states;
            let mut short = DVector::zeros(kept + inputs);
            short
                .rows_mut(0, kept)
                .copy_from(&(basis.transpose() * row.rows(0, states)));
            short
                .rows_mut(kept, inputs)
                .copy_from(&row.rows(states, inputs));
            short
        };
        Reduced {
            a: basis.transpose() * &reduced.a * &basis,
            b: basis.transpose() * &reduced.b,
            legs: reduced.legs.iter().map(row).collect(),
            supply: row(&reduced.supply),
            resistors: reduced
                .resistors
                .iter()
                .map(|(o, ohm, r)| (*o, *ohm, row(r)))
                .collect(),
        }
    };
    Some(positions.iter().map(project).collect())
}

/// What moves the states, column by column, each column scaled to one: rates of a closed switch may be 1e10 times
/// those of the network, and rounding beside them would look like motion. Columns that are rounding themselves stay.
fn joined(reduced: &Reduced) -> DMatrix<f64> {
    let (states, inputs) = reduced.b.shape();
    let mut all = DMatrix::zeros(states, states + inputs);
    all.columns_mut(0, states).copy_from(&reduced.a);
    all.columns_mut(states, inputs).copy_from(&reduced.b);
    let noise = ROUNDING * all.amax();
    for mut column in all.column_iter_mut() {
        let largest = column.amax();
        if largest > noise.max(1.0) {
            column /= largest;
        }
    }
    all
}

/// Orthonormal columns `l` with `l^T matrix = 0`, up to `tolerance` of the largest pivot (or of one, where the
/// matrix is smaller than that).
///
/// By Householder reflections with column pivoting: past the rank, what is left of the columns is rounding and the
/// reflections' own columns span the rest. A singular value decomposition was seen to leave 1e-8 in its vectors.
fn left_null(matrix: &DMatrix<f64>, tolerance: f64) -> Option<DMatrix<f64>> {
    let rows = matrix.nrows();
    // Square, so that every left vector is there.
    let mut square = DMatrix::zeros(rows, rows.max(matrix.ncols()));
    square.columns_mut(0, matrix.ncols()).copy_from(matrix);
    if rows == 0 || !square.iter().all(|entry| entry.is_finite()) {
        return (rows == 0).then_some(square);
    }
    let decomposed = square.col_piv_qr();
    let r = decomposed.r();
    let pivots: Vec<f64> = (0..rows).map(|i| r[(i, i)].abs()).collect();
    let limit = tolerance * pivots.iter().copied().fold(1.0, f64::max);
    let null: Vec<_> = (0..rows).filter(|&i| pivots[i] <= limit).collect();
    Some(decomposed.q().select_columns(&null))
}
