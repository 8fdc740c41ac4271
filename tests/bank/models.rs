//! Named stages, each with what is known about it beforehand.

use quietedge::stage::Stage;

/// What every solver path must reproduce.
#[derive(Debug, Clone, Copy)]
pub enum Known {
    /// Only the invariants that hold for every stage.
    Invariants,
    /// The load stands on the drain and an ideal choke feeds it: one state, solved by hand in `main.rs`.
    OneState,
    /// The second harmonic of the load voltage is shorted out: at most so many dBc are left.
    TrappedSecond(f64),
    /// The same as another model, whose network is another way to draw it.
    SameAs(&'static str),
}

/// A stage of the bank.
#[derive(Debug, Clone, Copy)]
pub struct Model {
    pub name: &'static str,
    pub toml: &'static str,
    pub known: Known,
}

impl Model {
    pub fn stage(&self) -> Stage {
        Stage::parse(self.name, self.toml).unwrap_or_else(|problem| panic!("{problem}"))
    }
}

pub fn model(name: &str) -> Model {
    *BANK
        .iter()
        .find(|model| model.name == name)
        .unwrap_or_else(|| panic!("no model {name}"))
}

pub const BANK: [Model; 14] = [
    Model {
        name: "one state, choke",
        known: Known::OneState,
        toml: r#"
frequency = "10 MHz"
supply = { voltage = "5 V" }
switch = { closed_resistance = "1 ohm" }
drain = { capacitance = "200 pF" }
driver = { duty = 0.4 }
feed = { choke = true, resistance = "0.5 ohm" }
load = { resistance = "50 ohm" }
"#,
    },
    Model {
        name: "class E, choke",
        known: Known::Invariants,
        // w R C and X/R of F. H. Raab, IEEE Trans. Circuits Syst., Dec. 1977, at a loaded Q of 8.
        toml: r#"
frequency = "1 MHz"
supply = { voltage = "12 V" }
switch = { closed_resistance = "0.2 ohm" }
drain = { capacitance = "2.922 nF" }
driver = { duty = 0.5 }
feed = { choke = true }
[load]
resistance = "10 ohm"
[[load.ladder]]
series = { inductance = "14.57 uH" }
[[load.ladder]]
series = { capacitance = "1.989 nF" }
"#,
    },
    Model {
        name: "class E, finite feed",
        known: Known::Invariants,
        // w L/R = 0.732, w R C = 0.685, no excess reactance: A. Grebennikov, High Frequency Electronics, July 2004.
        toml: r#"
frequency = "100 MHz"
supply = { voltage = "6 V" }
switch = { closed_resistance = "0.15 ohm", open_resistance = "20 kohm" }
drain = { capacitance = "109 pF" }
driver = { duty = 0.5 }
feed = { inductance = "11.65 nH", resistance = "60 mohm" }
[load]
resistance = "10 ohm"
[[load.ladder]]
series = { inductance = "79.58 nH", q = 100 }
[[load.ladder]]
series = { capacitance = "31.83 pF", q = 500 }
"#,
    },
    Model {
        name: "tide gauge",
        known: Known::Invariants,
        toml: include_str!("../../signals/tide-gauge.stage.toml"),
    },
    Model {
        name: "robot link",
        known: Known::Invariants,
        toml: include_str!("../../signals/robot-link.stage.toml"),
    },
    Model {
        name: "narrow width, load inductive",
        known: Known::Invariants,
        toml: r#"
frequency = "27 MHz"
supply = { voltage = "9 V" }
switch = { closed_resistance = "0.4 ohm", open_resistance = "5 kohm" }
drain = { capacitance = "150 pF" }
driver = { duty = 0.25 }
feed = { inductance = "220 nH", resistance = "0.2 ohm" }
[load]
resistance = "12 ohm"
reactance = "7 ohm"
[[load.ladder]]
series = { capacitance = "180 pF", q = 300 }
[[load.ladder]]
series = { inductance = "330 nH", q = 90 }
"#,
    },
    Model {
        name: "wide width, load capacitive",
        known: Known::Invariants,
        toml: r#"
frequency = "27 MHz"
supply = { voltage = "9 V" }
switch = { closed_resistance = "1 ohm" }
drain = { capacitance = "60 pF" }
driver = { duty = 0.7 }
feed = { inductance = "470 nH", resistance = "0.3 ohm" }
[load]
resistance = "20 ohm"
reactance = "-9 ohm"
[[load.ladder]]
series = { inductance = "560 nH", q = 120 }
"#,
    },
    Model {
        name: "second harmonic trapped",
        known: Known::TrappedSecond(-60.0),
        // A series resonance to ground at 2 x 50 MHz: 100 nH with 25.330 pF.
        toml: r#"
frequency = "50 MHz"
supply = { voltage = "8 V" }
switch = { closed_resistance = "0.3 ohm" }
drain = { capacitance = "90 pF" }
driver = { duty = 0.45 }
feed = { choke = true, resistance = "0.1 ohm" }
[load]
resistance = "15 ohm"
[[load.ladder]]
series = { inductance = "120 nH", q = 80 }
[[load.ladder]]
shunt = { inductance = "100 nH", capacitance = "25.330296 pF", q = 2000 }
[[load.ladder]]
series = { capacitance = "220 pF" }
"#,
    },
    Model {
        name: "tank in the path",
        known: Known::Invariants,
        toml: r#"
frequency = "50 MHz"
supply = { voltage = "8 V" }
switch = { closed_resistance = "0.3 ohm" }
drain = { capacitance = "90 pF" }
feed = { inductance = "100 nH", resistance = "0.1 ohm" }
[load]
resistance = "15 ohm"
[[load.ladder]]
series = { capacitance = "330 pF" }
[[load.ladder]]
series = { inductance = "82 nH", q = 80 }
[[load.ladder]]
tank = { inductance = "33 nH", capacitance = "68 pF", resistance = "2 kohm", q = 60, capacitor_q = 400 }
"#,
    },
    Model {
        name: "inductors alone at a node",
        known: Known::Invariants,
        // Three coils meet: one current follows from the other two.
        toml: r#"
frequency = "30 MHz"
supply = { voltage = "10 V" }
switch = { closed_resistance = "0.5 ohm" }
drain = { capacitance = "100 pF" }
feed = { choke = true }
[load]
resistance = "25 ohm"
[[load.ladder]]
series = { capacitance = "470 pF" }
[[load.ladder]]
series = { inductance = "150 nH" }
[[load.ladder]]
shunt = { inductance = "390 nH" }
[[load.ladder]]
series = { inductance = "68 nH" }
"#,
    },
    Model {
        name: "capacitor beside the drain's",
        known: Known::Invariants,
        // 40 pF and 60 pF in parallel: one voltage, two states in the branch list.
        toml: r#"
frequency = "30 MHz"
supply = { voltage = "10 V" }
switch = { closed_resistance = "0.5 ohm" }
drain = { capacitance = "40 pF" }
feed = { inductance = "150 nH", resistance = "0.1 ohm" }
[load]
resistance = "25 ohm"
[[load.ladder]]
shunt = { capacitance = "60 pF" }
[[load.ladder]]
series = { inductance = "270 nH", capacitance = "150 pF", q = 100 }
"#,
    },
    Model {
        name: "one drain capacitor",
        known: Known::SameAs("capacitor beside the drain's"),
        toml: r#"
frequency = "30 MHz"
supply = { voltage = "10 V" }
switch = { closed_resistance = "0.5 ohm" }
drain = { capacitance = "100 pF" }
feed = { inductance = "150 nH", resistance = "0.1 ohm" }
[load]
resistance = "25 ohm"
[[load.ladder]]
series = { inductance = "270 nH", q = 100 }
[[load.ladder]]
series = { capacitance = "300 pF" }
[[load.ladder]]
series = { capacitance = "300 pF" }
"#,
    },
    Model {
        name: "charge trapped between capacitors",
        known: Known::Invariants,
        toml: r#"
frequency = "13.56 MHz"
supply = { voltage = "24 V" }
switch = { closed_resistance = "0.3 ohm" }
drain = { capacitance = "220 pF" }
driver = { duty = 0.5 }
feed = { choke = true, resistance = "0.2 ohm" }
[load]
resistance = "30 ohm"
[[load.ladder]]
series = { capacitance = "680 pF" }
[[load.ladder]]
series = { inductance = "820 nH", q = 150 }
[[load.ladder]]
shunt = { capacitance = "330 pF", q = 500 }
[[load.ladder]]
series = { capacitance = "1 nF" }
"#,
    },
    Model {
        name: "low pass to the load",
        known: Known::Invariants,
        toml: r#"
frequency = "400 MHz"
supply = { voltage = "3.3 V" }
switch = { closed_resistance = "0.25 ohm", open_resistance = "2 kohm" }
drain = { capacitance = "8 pF" }
driver = { duty = 0.55 }
feed = { inductance = "5.6 nH", resistance = "80 mohm" }
[load]
resistance = "50 ohm"
[[load.ladder]]
series = { inductance = "8.2 nH", q = 60 }
[[load.ladder]]
series = { capacitance = "33 pF" }
[[load.ladder]]
shunt = { capacitance = "15 pF", q = 300 }
[[load.ladder]]
series = { inductance = "10 nH", q = 60 }
[[load.ladder]]
shunt = { capacitance = "6.8 pF", q = 300 }
"#,
    },
];
