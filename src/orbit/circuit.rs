//! A stage as a list of branches between nodes, in normalised units.
//!
//! Impedances are divided by the load resistance and time is the carrier's angle, so that a branch
//! is a plain number: `R/R_L`, `w L/R_L`, `w C R_L`. Voltages stay in volts, currents are in volts
//! across the load resistance.

use std::f64::consts::TAU;

use crate::stage::{Arm, Arrangement, Element, Feed, Load, Part, Rung, Stage};

/// Node 0 is ground.
pub const GROUND: usize = 0;

/// Whose losses a resistor counts to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Owner {
    /// The contact of this number, closed or open.
    Contact(usize),
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

/// A voltage source: its node, and its voltage as a part of the supply.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Rail {
    pub node: usize,
    pub share: f64,
}

/// An ideal choke: the node that its constant current enters, its resistance, which stands in no branch, and the
/// voltage that it hangs on as a part of the supply.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Choke {
    pub node: usize,
    pub ohm: f64,
    pub share: f64,
}

/// Where the power comes from: one input for all rails, or one for each choke.
#[derive(Debug, Clone, PartialEq)]
pub enum Input {
    Voltage(Vec<Rail>),
    Current(Vec<Choke>),
}

impl Input {
    /// How many constants drive the network.
    pub fn count(&self) -> usize {
        match self {
            Self::Voltage(_) => 1,
            Self::Current(chokes) => chokes.len(),
        }
    }
}

/// The far end of a contact.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum End {
    Ground,
    /// The rail of this node.
    Rail(Rail),
}

/// A switch at a leg.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Contact {
    /// Index into the circuit's legs.
    pub leg: usize,
    pub end: End,
    pub closed_ohm: f64,
    /// None without leakage.
    pub open_ohm: Option<f64>,
}

impl Contact {
    /// Resistance of the contact in one of its positions; none where no current flows at all.
    pub fn ohm(&self, closed: bool) -> Option<f64> {
        if closed {
            Some(self.closed_ohm)
        } else {
            self.open_ohm
        }
    }
}

/// The network with its switches beside it.
#[derive(Debug, Clone, PartialEq)]
pub struct Circuit {
    pub nodes: usize,
    /// The switched nodes: the drain of each stage.
    pub legs: Vec<usize>,
    pub contacts: Vec<Contact>,
    pub input: Input,
    pub branches: Vec<Branch>,
}

impl Circuit {
    /// The branches of `stage`.
    pub fn new(stage: &Stage) -> Self {
        let mut builder = Builder::new(TAU * stage.frequency_hz, stage.load.ohm);
        let drain = builder.leg(stage, 1.0);
        let end = builder.ladder(drain, GROUND, &stage.ladder, 0);
        builder.load(end, GROUND, &stage.load);
        builder.finish()
    }
}

/// A circuit in the making.
#[derive(Debug)]
pub struct Builder {
    angular_hz: f64,
    load_ohm: f64,
    nodes: usize,
    legs: Vec<usize>,
    contacts: Vec<Contact>,
    rails: Vec<Rail>,
    chokes: Vec<Choke>,
    branches: Vec<Branch>,
}

impl Builder {
    /// Nothing but ground; impedances will be divided by `load_ohm`.
    pub fn new(angular_hz: f64, load_ohm: f64) -> Self {
        Self {
            angular_hz,
            load_ohm,
            nodes: 1,
            legs: Vec::new(),
            contacts: Vec::new(),
            rails: Vec::new(),
            chokes: Vec::new(),
            branches: Vec::new(),
        }
    }

    pub fn finish(self) -> Circuit {
        Circuit {
            nodes: self.nodes,
            legs: self.legs,
            contacts: self.contacts,
            input: if self.chokes.is_empty() {
                Input::Voltage(self.rails)
            } else {
                Input::Current(self.chokes)
            },
            branches: self.branches,
        }
    }

    /// Supply, feed, drain capacitance and switches of `stage`, at `share` of the supply. Returns its drain.
    pub fn leg(&mut self, stage: &Stage, share: f64) -> usize {
        let drain = self.node();
        let leg = self.legs.len();
        self.legs.push(drain);
        self.add(
            drain,
            GROUND,
            Element::Capacitor(stage.drain_f),
            Owner::Contact(self.contacts.len()),
        );
        match stage.feed {
            Feed::Inductor { henry, ohm } => {
                let node = self.node();
                self.rails.push(Rail { node, share });
                let part = Part {
                    element: Element::Inductor(henry),
                    loss_ohm: ohm,
                };
                self.chain(node, drain, &[part], Owner::Feed);
            }
            Feed::Choke { ohm } => self.chokes.push(Choke {
                node: drain,
                ohm: ohm / self.load_ohm,
                share,
            }),
            Feed::Direct => {
                let node = self.node();
                self.rails.push(Rail { node, share });
            }
        }
        let per_load = |ohm: f64| ohm.is_finite().then_some(ohm / self.load_ohm);
        let contact = |end: End, closed_ohm: f64| Contact {
            leg,
            end,
            closed_ohm: closed_ohm / self.load_ohm,
            open_ohm: per_load(stage.switch.open_ohm),
        };
        let lower = contact(End::Ground, stage.switch.closed_ohm);
        if let (Arrangement::Pair { upper_ohm }, Some(&rail)) =
            (stage.switch.arrangement, self.rails.last())
        {
            let upper = contact(End::Rail(rail), upper_ohm);
            self.contacts.push(upper);
        }
        self.contacts.push(lower);
        drain
    }

    /// `rungs` from `from`, the shunt ones to `ground`, counted from `first`. Returns the far end.
    pub fn ladder(&mut self, from: usize, ground: usize, rungs: &[Rung], first: usize) -> usize {
        let mut through = from;
        for (index, rung) in rungs.iter().enumerate() {
            let owner = Owner::Rung(first + index);
            match rung.arm {
                Arm::Shunt => self.chain(through, ground, &rung.parts, owner),
                Arm::Series => {
                    let next = self.node();
                    self.chain(through, next, &rung.parts, owner);
                    through = next;
                }
                Arm::Tank => {
                    let next = self.node();
                    for part in &rung.parts {
                        self.chain(through, next, std::slice::from_ref(part), owner);
                    }
                    through = next;
                }
            }
        }
        through
    }

    /// The load between two nodes.
    pub fn load(&mut self, from: usize, to: usize, load: &Load) {
        let mut through = from;
        if let Some(element) = load.reactance {
            let next = self.node();
            self.add(through, next, element, Owner::Load);
            through = next;
        }
        self.add(through, to, Element::Resistor(load.ohm), Owner::Load);
    }

    /// Whether a switch stands at `node`.
    pub fn is_leg(&self, node: usize) -> bool {
        self.legs.contains(&node)
    }

    /// Makes `gone` the same node as `kept`; neither is a leg or a rail.
    pub fn merge(&mut self, gone: usize, kept: usize) {
        let moved = |node: usize| match node {
            node if node == gone => kept,
            node if node > gone => node - 1,
            node => node,
        };
        for branch in &mut self.branches {
            branch.from = moved(branch.from);
            branch.to = moved(branch.to);
        }
        for leg in &mut self.legs {
            *leg = moved(*leg);
        }
        for contact in &mut self.contacts {
            if let End::Rail(rail) = &mut contact.end {
                rail.node = moved(rail.node);
            }
        }
        for rail in &mut self.rails {
            rail.node = moved(rail.node);
        }
        for choke in &mut self.chokes {
            choke.node = moved(choke.node);
        }
        self.nodes -= 1;
    }

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
    pub fn chain(&mut self, from: usize, to: usize, parts: &[Part], owner: Owner) {
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
