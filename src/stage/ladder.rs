//! The network between drain and load, rung by rung.

/// One lossless element or a resistor.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Element {
    /// H
    Inductor(f64),
    /// F
    Capacitor(f64),
    /// ohm
    Resistor(f64),
}

/// An element with the series resistance that its quality factor means, ohm (0 for an ideal one).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Part {
    /// The element itself.
    pub element: Element,
    /// Series resistance, ohm.
    pub loss_ohm: f64,
}

/// Where a rung stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Arm {
    /// In the through path, parts in series with each other.
    Series,
    /// From the through path to ground, parts in series with each other.
    Shunt,
    /// In the through path, parts in parallel with each other.
    Tank,
}

/// One rung of the ladder.
#[derive(Debug, Clone, PartialEq)]
pub struct Rung {
    /// Where it stands.
    pub arm: Arm,
    /// At least one part.
    pub parts: Vec<Part>,
}
