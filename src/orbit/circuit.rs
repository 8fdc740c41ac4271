//! A stage as a list of branches between nodes, in normalised units.
//!
//! Impedances are divided by the load resistance and time is the carrier's angle, so that a branch
//! is a plain number: `R/R_L`, `w L/R_L`, `w C R_L`. Voltages stay in volts, currents are in volts
//! across the load resistance.

use std::f64::consts::TAU;

use crate::stage::{Arm, Element, Feed, Part, Stage};

/// Node 0 is ground.
pub const GROUND: usize = 0;

/// Whose losses a resistor counts to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Owner {
    /// The switch, closed or open.
    Switch,
    /// The feed inductor.
    Feed,
    /// Rung of this number, from 0.
    Rung(usize),
    /// The load itself.
    Load,
}

/// One branch with its current flowing from the first node to the second.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Branch {
    pub from: usize,
    pub to: usize,
    pub element: Normalised,
}

/// An element in normalised units.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Normalised {
    Inductor(f64),
    Capacitor(f64),
    Resistor(f64, Owner),
}

/// Where the power comes from.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Input {
    /// A voltage source at this node.
    Voltage(usize),
    /// A constant current into this node: an ideal choke.
    Current(usize),
}

/// The stage without its switch.
#[derive(Debug, Clone, PartialEq)]
pub struct Circuit {
    pub nodes: usize,
    pub drain: usize,
    pub input: Input,
    pub branches: Vec<Branch>,
    /// Feed resistance of an ideal choke, which stands in no branch.
    pub choke_ohm: f64,
}

impl Circuit {
    /// The branches of `stage`.
    pub fn new(stage: &Stage) -> Self {
        let mut builder = Builder {
            nodes: 1,
            angular_hz: TAU * stage.frequency_hz,
            load_ohm: stage.load.ohm,
            branches: Vec::new(),
        };
        let drain = builder.node();
        builder.add(
            drain,
            GROUND,
            Element::Capacitor(stage.drain_f),
            Owner::Switch,
        );
        let (input, choke_ohm) = match stage.feed {
            Feed::Inductor { henry, ohm } => {
                let supply = builder.node();
                let part = Part {
                    element: Element::Inductor(henry),
                    loss_ohm: ohm,
                };
                builder.chain(supply, drain, &[part], Owner::Feed);
                (Input::Voltage(supply), 0.0)
            }
            Feed::Choke { ohm } => (Input::Current(drain), ohm / stage.load.ohm),
        };
        let mut through = drain;
        for (index, rung) in stage.ladder.iter().enumerate() {
            let owner = Owner::Rung(index);
            match rung.arm {
                Arm::Shunt => builder.chain(through, GROUND, &rung.parts, owner),
                Arm::Series => {
                    let next = builder.node();
                    builder.chain(through, next, &rung.parts, owner);
                    through = next;
                }
                Arm::Tank => {
                    let next = builder.node();
                    for part in &rung.parts {
                        builder.chain(through, next, std::slice::from_ref(part), owner);
                    }
                    through = next;
                }
            }
        }
        if let Some(element) = stage.load.reactance {
            let next = builder.node();
            builder.add(through, next, element, Owner::Load);
            through = next;
        }
        builder.add(
            through,
            GROUND,
            Element::Resistor(stage.load.ohm),
            Owner::Load,
        );
        Self {
            nodes: builder.nodes,
            drain,
            input,
            branches: builder.branches,
            choke_ohm,
        }
    }
}

struct Builder {
    nodes: usize,
    angular_hz: f64,
    load_ohm: f64,
    branches: Vec<Branch>,
}

impl Builder {
    fn node(&mut self) -> usize {
        self.nodes += 1;
        self.nodes - 1
    }

    fn add(&mut self, from: usize, to: usize, element: Element, owner: Owner) {
        let element = match element {
            Element::Inductor(henry) => {
                Normalised::Inductor(self.angular_hz * henry / self.load_ohm)
            }
            Element::Capacitor(farad) => {
                Normalised::Capacitor(self.angular_hz * farad * self.load_ohm)
            }
            Element::Resistor(ohm) => Normalised::Resistor(ohm / self.load_ohm, owner),
        };
        self.branches.push(Branch { from, to, element });
    }

    /// `parts` with their loss resistances, all in series from `from` to `to`.
    fn chain(&mut self, from: usize, to: usize, parts: &[Part], owner: Owner) {
        let mut elements = Vec::new();
        for part in parts {
            elements.push(part.element);
            if part.loss_ohm > 0.0 {
                elements.push(Element::Resistor(part.loss_ohm));
            }
        }
        let mut here = from;
        for (index, element) in elements.iter().enumerate() {
            let next = if index + 1 == elements.len() {
                to
            } else {
                self.node()
            };
            self.add(here, next, *element, owner);
            here = next;
        }
    }
}
