//! How much a search may cost.

use std::cell::Cell;

use crate::orbit::{Drive, Network, Orbit};
use crate::stage::Stage;

/// Units of work that one design may take: about half a minute where everything fails.
const UNITS: u64 = 1_000_000;

/// A straight orbit, a curved one, and a curved one that fails, each in units of some ten microseconds.
const STRAIGHT: u64 = 2;
const CURVED: u64 = 200;
const FAILED: u64 = 60_000;

/// Work that is left.
#[derive(Debug)]
pub struct Budget {
    left: Cell<u64>,
}

impl Budget {
    /// The whole budget.
    pub fn new() -> Self {
        Self {
            left: Cell::new(UNITS),
        }
    }

    /// Whether nothing is left.
    pub fn is_spent(&self) -> bool {
        self.left.get() == 0
    }

    /// The orbit of `stage` at its own supply and duty; none where there is none, and once the budget is spent.
    pub fn orbit_of(&self, stage: &Stage) -> Option<Orbit> {
        if self.is_spent() {
            return None;
        }
        let drive = Drive::new(&stage.driver, stage.driver.duty);
        let orbit = Network::new(stage)
            .ok()
            .and_then(|network| network.orbit(stage.supply_v, &drive).ok());
        let cost = match (stage.is_curved(), &orbit) {
            (false, _) => STRAIGHT,
            (true, Some(_)) => CURVED,
            (true, None) => FAILED,
        };
        self.left.set(self.left.get().saturating_sub(cost));
        orbit
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn failures_use_it_up() {
        // The gate's edges take longer than the switch stays closed: curved, and without an orbit at once.
        let text = "frequency = \"1 MHz\"\nsupply = { voltage = 5 }\nswitch = { closed_resistance = 1 }\n\
                    drain = { capacitance = \"1 nF\", gate_coupling = \"1 pF\" }\nfeed = { choke = true }\n\
                    driver = { swing = 3, rise = \"30 ns\", fall = \"1200 ns\" }\nload = { resistance = 50 }\n";
        let stage = Stage::parse("edges", text).unwrap();
        let budget = Budget::new();
        let mut tries = 0;
        while !budget.is_spent() {
            assert!(budget.orbit_of(&stage).is_none());
            tries += 1;
        }
        assert_eq!(tries, UNITS.div_ceil(FAILED));
        assert!(budget.orbit_of(&stage).is_none());
    }
}
