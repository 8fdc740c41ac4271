//! Orbits one after another, each found from the last.

use super::balance::{Orbit, Scale};
use super::engine::Engine;
use super::figures::gate_charge_w;
use super::network::{Drive, Model, Network, OrbitError, check, intervals};
use super::period::{Scales, State};
use super::shooting::Found;

/// Solves orbits of one network, starting from the one before: continuation along a map. For a linear stage it is
/// the exact solution each time.
#[derive(Debug)]
pub struct Tracker<'a> {
    network: &'a Network,
    engine: Option<(Drive, Engine)>,
    /// The last orbit and the one before it, with their supplies.
    last: Vec<(f64, Found)>,
}

impl<'a> Tracker<'a> {
    /// A tracker that has solved nothing yet.
    pub fn new(network: &'a Network) -> Self {
        Self {
            network,
            engine: None,
            last: Vec::new(),
        }
    }

    /// A tracker of `network` that starts from the last orbit of `other`, a network of the same elements with other
    /// values. A start only: what it finds is an orbit of `network`.
    pub fn beside(network: &'a Network, other: &Tracker<'_>) -> Self {
        let same = network.states() == other.network.states();
        let last = other.last.last().filter(|_| same);
        Self {
            last: last.cloned().into_iter().collect(),
            ..Self::new(network)
        }
    }

    /// The periodic steady state at `supply_v` with `drive`. After a failure the next one starts afresh.
    ///
    /// # Errors
    /// [`OrbitError`].
    pub fn orbit(&mut self, supply_v: f64, drive: &Drive) -> Result<Orbit, OrbitError> {
        check(supply_v, drive)?;
        let stage = self.network.stage();
        let curved = match self.network.model() {
            Model::Linear(linear) => {
                let unit = linear.solver.solve(&intervals(stage, drive)?)?;
                let scale = Scale {
                    load_ohm: stage.load.ohm,
                    frequency_hz: stage.frequency_hz,
                    driver_w: gate_charge_w(stage),
                };
                return Orbit::scaled(&unit, &scale, supply_v, drive, &linear.names);
            }
            Model::Curved(curved) => curved,
        };
        let mut engine = match self.engine.take() {
            Some((same, engine)) if same == *drive => engine,
            _ => {
                // States of another drive do not lie on one line with those of this one.
                if self.last.len() > 1 {
                    self.last.remove(0);
                }
                curved.engine(stage, drive)?
            }
        };
        let near = self.predicted(supply_v);
        let solved = curved.solve(stage, &mut engine, supply_v, drive, near);
        self.engine = Some((*drive, engine));
        if solved.is_err() {
            self.last.clear();
        }
        let solved = solved?;
        if self.last.len() > 1 {
            self.last.remove(0);
        }
        self.last.push((supply_v, solved.found));
        Ok(solved.orbit)
    }

    /// On the line through the last two states, or the last one.
    fn predicted(&self, supply_v: f64) -> Option<(State, Scales)> {
        let (here_v, here) = self.last.last()?;
        let mut state = here.state.clone();
        if let [(before_v, before), _] = self.last.as_slice() {
            let share = (supply_v - here_v) / (here_v - before_v);
            // Not far outside the two.
            if share.abs() <= 2.0 {
                state.q += share * (here.state.q - before.state.q);
                state.u += share * (here.state.u - before.state.u);
                for (x, before) in state.x.iter_mut().zip(&before.state.x) {
                    *x += share * (*x - before);
                }
            }
        }
        Some((state, here.scales))
    }
}
