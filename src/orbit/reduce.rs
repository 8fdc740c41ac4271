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

use super::circuit::{Branch, Circuit, GROUND, Input, Normalised, Owner};

/// Singular values below this fraction of the largest count as zero. The tableau's entries are at most
/// one in magnitude, so rounding is near 1e-15.
const RANK_TOLERANCE: f64 = 1e-12;

/// Refinements of the solution of the network equations. Each one takes the error down by the ratio of rounding
/// to the smallest singular value, which is 1e-4 or better within [`RANK_TOLERANCE`].
const REFINEMENTS: usize = 2;

/// `dy/dtheta = A y + b u`; every quantity of interest is `row . (y, u)`.
#[derive(Debug, Clone)]
pub struct Reduced {
    /// n x n
    pub a: DMatrix<f64>,
    /// n
    pub b: DVector<f64>,
    /// Drain voltage, n + 1.
    pub drain: DVector<f64>,
    /// Current drawn from the supply, n + 1.
    pub supply: DVector<f64>,
    /// Every resistor: owner, resistance, current row of n + 1.
    pub resistors: Vec<(Owner, f64, DVector<f64>)>,
}

/// The constrained subspace of the states, the same in both positions of the switch.
#[derive(Debug, Clone)]
pub struct Subspace {
    /// Constraint rows over the scaled states.
    constraints: DMatrix<f64>,
    /// Orthonormal columns.
    basis: DMatrix<f64>,
}

/// The equations of one switch position before reduction.
struct Tableau {
    t: DMatrix<f64>,
    h: DMatrix<f64>,
    g: DVector<f64>,
    /// Scaled state derivatives as rows over `w`.
    derivative: DMatrix<f64>,
    node: Vec<Option<usize>>,
    source: Option<usize>,
    resistors: Vec<(Owner, f64, usize)>,
}

impl Tableau {
    fn new(circuit: &Circuit, switch_ohm: Option<f64>) -> Self {
        let mut branches = circuit.branches.clone();
        if let Some(ohm) = switch_ohm {
            let element = Normalised::Resistor(ohm, Owner::Switch);
            branches.push(Branch {
                from: circuit.drain,
                to: GROUND,
                element,
            });
        }
        let voltages = circuit.nodes - 1;
        let own_current = |branch: &&Branch| !matches!(branch.element, Normalised::Inductor(_));
        let currents = branches.iter().filter(own_current).count();
        let states = branches
            .iter()
            .filter(|b| !matches!(b.element, Normalised::Resistor(..)))
            .count();
        let with_source = matches!(circuit.input, Input::Voltage(_));
        let size = voltages + currents + usize::from(with_source);

        let mut tableau = Self {
            t: DMatrix::zeros(size, size),
            h: DMatrix::zeros(size, states),
            g: DVector::zeros(size),
            derivative: DMatrix::zeros(states, size),
            node: (0..circuit.nodes).map(|node| node.checked_sub(1)).collect(),
            source: with_source.then_some(size - 1),
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
        match circuit.input {
            Input::Voltage(node) => {
                let node = node - 1;
                tableau.t[(node, size - 1)] = -1.0;
                tableau.t[(size - 1, node)] = 1.0;
                tableau.g[size - 1] = 1.0;
            }
            Input::Current(node) => tableau.g[node - 1] = 1.0,
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
        let constraints = Tableau::new(circuit, None).constraints()?;
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

    /// State equations with the switch at `switch_ohm` (`None`: open without leakage).
    ///
    /// `None` where the network has no unique solution.
    pub fn equations(&self, circuit: &Circuit, switch_ohm: Option<f64>) -> Option<Reduced> {
        let tableau = Tableau::new(circuit, switch_ohm);
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
        let mut right = DMatrix::zeros(size + extra, states + 1);
        right
            .view_mut((0, 0), (size, states))
            .copy_from(&(&tableau.h * &self.basis));
        right.view_mut((0, states), (size, 1)).copy_from(&tableau.g);
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
        let supply = match tableau.source {
            Some(source) => row(source),
            None => {
                let mut constant = DVector::zeros(states + 1);
                constant[states] = 1.0;
                constant
            }
        };
        Some(Reduced {
            a: rate.columns(0, states).into_owned(),
            b: rate.column(states).into_owned(),
            drain: row(circuit.drain - 1),
            supply,
            resistors: tableau
                .resistors
                .iter()
                .map(|&(owner, ohm, at)| (owner, ohm, row(at)))
                .collect(),
        })
    }
}

/// Takes out what never moves: a combination of states that neither position of the switch nor the input can
/// change, such as the charge trapped between two series capacitors with only coils between them. A stage that
/// started from rest holds none of it; left in, it would make the periodic state ambiguous.
pub fn without_idle(closed: Reduced, open: Reduced) -> Option<[Reduced; 2]> {
    let states = open.a.nrows();
    let idle = left_null(&joined(&open), RANK_TOLERANCE)?;
    if idle.ncols() == 0 {
        return Some([closed, open]);
    }
    // Of these, the combinations that the closed switch does not touch either.
    let touched = idle.transpose() * joined(&closed);
    let idle = &idle * left_null(&touched, 1e-9)?;
    if idle.ncols() == 0 {
        return Some([closed, open]);
    }
    // The states that are free to move: the null space of a square matrix that spans the idle ones.
    let basis = left_null(&(&idle * idle.transpose()), 1e-9)?;
    let project = |reduced: Reduced| {
        let row = |row: &DVector<f64>| {
            let mut short = DVector::zeros(basis.ncols() + 1);
            short
                .rows_mut(0, basis.ncols())
                .copy_from(&(basis.transpose() * row.rows(0, states)));
            short[basis.ncols()] = row[states];
            short
        };
        Reduced {
            a: basis.transpose() * &reduced.a * &basis,
            b: basis.transpose() * &reduced.b,
            drain: row(&reduced.drain),
            supply: row(&reduced.supply),
            resistors: reduced
                .resistors
                .iter()
                .map(|(o, ohm, r)| (*o, *ohm, row(r)))
                .collect(),
        }
    };
    Some([project(closed), project(open)])
}

fn joined(reduced: &Reduced) -> DMatrix<f64> {
    let states = reduced.a.nrows();
    let mut all = DMatrix::zeros(states, states + 1);
    all.columns_mut(0, states).copy_from(&reduced.a);
    all.set_column(states, &reduced.b);
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
