//! A [`Stage`] as a stage file that reads back to the same stage.

use std::f64::consts::TAU;
use std::fmt::Write;

use super::{Anchor, Arm, Arrangement, DrainCurve, Element, Feed, Part, Rung, Stage};
use crate::units::show;

/// Digits that bring every part back to a relative 1e-12.
const DIGITS: usize = 13;

/// The file that a written stage names for its table of drain capacitance.
pub const TABLE_NAME: &str = "drain-capacitance.csv";

impl Stage {
    /// The table of drain capacitance as the CSV file that [`Stage::to_toml`] names [`TABLE_NAME`]; none where the
    /// stage has no such table.
    pub fn drain_table_csv(&self) -> Option<String> {
        let Some(DrainCurve::Table(points)) = &self.drain_curve else {
            return None;
        };
        let rows = points
            .iter()
            .map(|(volt, farad)| format!("{volt},{farad}\n"));
        Some(
            std::iter::once("voltage_v,capacitance_f\n".to_owned())
                .chain(rows)
                .collect(),
        )
    }

    /// The stage as TOML, with `remarks` as comment lines on top.
    pub fn to_toml(&self, remarks: &[String]) -> String {
        let mut text = String::new();
        for remark in remarks {
            let _ = writeln!(text, "# {}", remark.replace(['\n', '\r'], " "));
        }
        let quoted = |value: f64, unit: &str| format!("\"{}\"", show(value, unit, DIGITS));
        let mut line = |line: String| {
            text.push_str(&line);
            text.push('\n');
        };
        line(format!(
            "title = {}",
            toml::Value::from(self.title.as_str())
        ));
        line(format!("frequency = {}", quoted(self.frequency_hz, "Hz")));
        line(format!(
            "\n[supply]\nvoltage = {}",
            quoted(self.supply_v, "V")
        ));
        line(format!(
            "\n[switch]\nclosed_resistance = {}",
            quoted(self.switch.closed_ohm, "ohm")
        ));
        if self.switch.open_ohm.is_finite() {
            line(format!(
                "open_resistance = {}",
                quoted(self.switch.open_ohm, "ohm")
            ));
        }
        if let Arrangement::Pair { upper_ohm } = self.switch.arrangement {
            let upper = quoted(upper_ohm, "ohm");
            line(format!(
                "arrangement = \"pair\"\nupper_resistance = {upper}"
            ));
        }
        if let Some(knee) = self.switch.knee {
            let current = quoted(knee.current_a, "A");
            line(format!(
                "knee = {{ current = {current}, sharpness = {} }}",
                knee.sharpness
            ));
        }
        if let Some(diode) = self.switch.diode {
            let (drop, ohm) = (quoted(diode.drop_v, "V"), quoted(diode.ohm, "ohm"));
            line(format!("diode = {{ drop = {drop}, resistance = {ohm} }}"));
        }
        line("\n[drain]".to_owned());
        if self.drain_f > 0.0 || self.drain_curve.is_none() {
            line(format!("capacitance = {}", quoted(self.drain_f, "F")));
        }
        match &self.drain_curve {
            Some(DrainCurve::Junction(junction)) => line(format!(
                "junction = {{ zero_bias = {}, potential = {}, grading = {} }}",
                quoted(junction.zero_bias_f, "F"),
                quoted(junction.potential_v, "V"),
                junction.grading
            )),
            Some(DrainCurve::Table(_)) => line(format!("table = \"{TABLE_NAME}\"")),
            None => {}
        }
        if self.gate_coupling_f > 0.0 {
            line(format!(
                "gate_coupling = {}",
                quoted(self.gate_coupling_f, "F")
            ));
        }
        let anchor = match self.driver.anchor {
            Anchor::Leading => "leading",
            Anchor::Centre => "centre",
            Anchor::Trailing => "trailing",
        };
        line(format!(
            "\n[driver]\nduty = {}\nanchor = \"{anchor}\"",
            self.driver.duty
        ));
        if let Some(gate) = self.driver.gate {
            line(format!("swing = {}", quoted(gate.swing_v, "V")));
            line(format!("rise = {}", quoted(gate.rise_s, "s")));
            line(format!("fall = {}", quoted(gate.fall_s, "s")));
            line(format!("gate_charge = {}", quoted(gate.charge_c, "C")));
        }
        if self.is_pair() {
            line(format!("dead_time = {}", quoted(self.driver.dead_s, "s")));
        }
        if self.feed != Feed::Direct {
            line("\n[feed]".to_owned());
        }
        let ohm = match self.feed {
            Feed::Direct => None,
            Feed::Inductor { henry, ohm } => {
                line(format!("inductance = {}", quoted(henry, "H")));
                Some(ohm)
            }
            Feed::Choke { ohm } => {
                line("choke = true".to_owned());
                Some(ohm)
            }
        };
        if let Some(ohm) = ohm {
            line(format!("resistance = {}", quoted(ohm, "ohm")));
        }
        line(format!(
            "\n[load]\nresistance = {}",
            quoted(self.load.reference_ohm, "ohm")
        ));
        let angular_hz = TAU * self.frequency_hz;
        if self.load.ohm != self.load.reference_ohm {
            let gamma = self.load.reflection(self.frequency_hz);
            let (magnitude, angle_rad) = (gamma.norm(), gamma.arg());
            line(format!(
                "reflection = {{ magnitude = {magnitude}, angle = {angle_rad} }}"
            ));
        } else if self.load.reactance.is_some() {
            let ohm = self.load.reactance_ohm(self.frequency_hz);
            line(format!("reactance = {}", quoted(ohm, "ohm")));
        }
        for rung in &self.ladder {
            line(format!(
                "\n[[load.ladder]]\n{}",
                rung_text(rung, angular_hz)
            ));
        }
        text
    }
}

fn rung_text(rung: &Rung, angular_hz: f64) -> String {
    let arm = match rung.arm {
        Arm::Series => "series",
        Arm::Shunt => "shunt",
        Arm::Tank => "tank",
    };
    let beside_inductor = rung
        .parts
        .iter()
        .any(|part| matches!(part.element, Element::Inductor(_)));
    let mut keys = Vec::new();
    for Part { element, loss_ohm } in &rung.parts {
        let (text, reactance, q) = match element {
            Element::Inductor(henry) => (
                format!("inductance = \"{}\"", show(*henry, "H", DIGITS)),
                angular_hz * henry,
                "q",
            ),
            Element::Capacitor(farad) => (
                format!("capacitance = \"{}\"", show(*farad, "F", DIGITS)),
                1.0 / (angular_hz * farad),
                if beside_inductor { "capacitor_q" } else { "q" },
            ),
            Element::Resistor(ohm) => (
                format!("resistance = \"{}\"", show(*ohm, "ohm", DIGITS)),
                0.0,
                "q",
            ),
        };
        keys.push(text);
        if *loss_ohm > 0.0 {
            keys.push(format!("{q} = {}", reactance / loss_ohm));
        }
    }
    format!("{arm} = {{ {} }}", keys.join(", "))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_pair_reads_back_to_the_same_stage() {
        let text = r#"
            frequency = "3.5 MHz"
            supply = { voltage = "24 V" }
            switch = { arrangement = "pair", closed_resistance = "0.12 ohm", upper_resistance = "0.2 ohm" }
            drain = { capacitance = "90 pF" }
            driver = { duty = 0.45, dead_time = "4 ns", swing = "5 V", rise = "1 ns", gate_charge = "2 nC" }
            load = { resistance = "12 ohm" }
        "#;
        let stage = Stage::parse("a", text).unwrap_or_else(|problem| panic!("{problem}"));
        let again = Stage::parse("a", &stage.to_toml(&[])).unwrap_or_else(|p| panic!("{p}"));
        assert_eq!(again, stage);
        assert_eq!(stage.feed, Feed::Direct);
        assert_eq!(
            stage.switch.arrangement,
            Arrangement::Pair { upper_ohm: 0.2 }
        );
        assert!((stage.driver.dead_s - 4e-9).abs() < 1e-20);
    }

    #[test]
    fn reads_back_to_the_same_stage() {
        let text = r#"
            title = "a \"quoted\" title"
            frequency = "169.4 MHz"
            supply = { voltage = "6 V" }
            switch = { closed_resistance = "0.12 ohm", open_resistance = "50 kohm", knee = { current = "7 A" }, diode = { drop = "0.8 V", resistance = "0.2 ohm" } }
            drain = { capacitance = "75.1234567 pF", junction = { zero_bias = "48 pF", potential = "0.8 V", grading = 0.45 }, gate_coupling = "1.5 pF" }
            driver = { duty = 0.45, anchor = "trailing", swing = "3.3 V", rise = "100 ps", fall = "120 ps", gate_charge = "1 nC" }
            feed = { inductance = "6.8 nH", resistance = "50 mohm" }
            [load]
            resistance = "50 ohm"
            reactance = "-3.3 ohm"
            [[load.ladder]]
            series = { inductance = "47 nH", q = 80, capacitance = "30 pF", capacitor_q = 400 }
            [[load.ladder]]
            tank = { inductance = "1 nH", capacitance = "2 pF", resistance = "4 kohm" }
            [[load.ladder]]
            shunt = { capacitance = "47 pF", q = 400 }
        "#;
        let stage = Stage::parse("a", text).unwrap();
        let written = stage.to_toml(&["made by a test".to_owned()]);
        let again = Stage::parse("b", &written).unwrap_or_else(|problem| panic!("{problem}"));
        let near = |a: f64, b: f64| (a - b).abs() <= 1e-11 * a.abs();
        assert_eq!(again.title, stage.title);
        assert_eq!(again.driver, stage.driver);
        assert_eq!(again.switch, stage.switch);
        assert_eq!(again.drain_curve, stage.drain_curve);
        assert_eq!(again.gate_coupling_f, stage.gate_coupling_f);
        assert!(near(stage.drain_f, again.drain_f));
        assert_eq!(stage.ladder.len(), again.ladder.len());
        assert_eq!(stage.load.ohm, again.load.ohm);
        let mut reflecting = stage.clone();
        reflecting.load = super::super::Load::reflecting(
            num_complex::Complex64::from_polar(0.4, -2.0),
            50.0,
            stage.frequency_hz,
        );
        let back = Stage::parse("c", &reflecting.to_toml(&[])).unwrap().load;
        let expected = reflecting.load.impedance_ohm(stage.frequency_hz);
        assert!((back.impedance_ohm(stage.frequency_hz) - expected).norm() < 1e-10);
        assert_eq!(back.reference_ohm, 50.0);
        let parts = |stage: &Stage| -> Vec<Part> {
            stage
                .ladder
                .iter()
                .flat_map(|rung| rung.parts.clone())
                .collect()
        };
        for (a, b) in parts(&stage).iter().zip(&parts(&again)) {
            assert!(near(a.loss_ohm, b.loss_ohm), "{a:?} {b:?}");
            match (a.element, b.element) {
                (Element::Inductor(a), Element::Inductor(b))
                | (Element::Capacitor(a), Element::Capacitor(b))
                | (Element::Resistor(a), Element::Resistor(b)) => assert!(near(a, b)),
                pair => panic!("{pair:?}"),
            }
        }
    }
}
