//! Orbits one after another, each found from the last.

use super::balance::Orbit;
use super::network::{Drive, Model, Network, OrbitError, check};
use super::period::Engine;
use super::shooting::Found;

/// Solves orbits of one network, starting from the one before: continuation along a map. For a linear stage it is
/// the exact solution each time.
#[derive(Debug)]
pub struct Tracker<'a> {
    network: &'a Network,
    engine: Option<(Drive, Engine)>,
    near: Option<Found>,
}

impl<'a> Tracker<'a> {
    /// A tracker that has solved nothing yet.
    pub fn new(network: &'a Network) -> Self {
        Self {
            network,
            engine: None,
            near: None,
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
            Model::Linear(solver) => {
                let unit = solver.solve(drive)?;
                return Orbit::scaled(&unit, stage, supply_v, drive);
            }
            Model::Curved(curved) => curved,
        };
        let near = self.near.take();
        let mut engine = match self.engine.take() {
            Some((same, engine)) if same == *drive => engine,
            _ => curved.engine(stage, drive)?,
        };
        let solved = curved.solve(stage, &mut engine, supply_v, drive, near.as_ref());
        self.engine = Some((*drive, engine));
        let solved = solved?;
        self.near = Some(solved.found);
        Ok(solved.orbit)
    }
}
