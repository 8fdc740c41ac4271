//! A [`Stage`] as a stage file that reads back to the same stage.

use std::f64::consts::TAU;
use std::fmt::Write;

use super::{Anchor, Arm, Element, Feed, Part, Rung, Stage};
use crate::units::show;

/// Digits that bring every part back to a relative 1e-12.
const DIGITS: usize = 13;

impl Stage {
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
        line(format!(
            "\n[drain]\ncapacitance = {}",
            quoted(self.drain_f, "F")
        ));
        let anchor = match self.driver.anchor {
            Anchor::Leading => "leading",
            Anchor::Centre => "centre",
            Anchor::Trailing => "trailing",
        };
        line(format!(
            "\n[driver]\nduty = {}\nanchor = \"{anchor}\"",
            self.driver.duty
        ));
        line("\n[feed]".to_owned());
        let ohm = match self.feed {
            Feed::Inductor { henry, ohm } => {
                line(format!("inductance = {}", quoted(henry, "H")));
                ohm
            }
            Feed::Choke { ohm } => {
                line("choke = true".to_owned());
                ohm
            }
        };
        line(format!("resistance = {}", quoted(ohm, "ohm")));
        line(format!(
            "\n[load]\nresistance = {}",
            quoted(self.load.ohm, "ohm")
        ));
        let angular_hz = TAU * self.frequency_hz;
        match self.load.reactance {
            Some(Element::Inductor(henry)) => {
                line(format!("reactance = {}", quoted(angular_hz * henry, "ohm")));
            }
            Some(Element::Capacitor(farad)) => {
                line(format!(
                    "reactance = {}",
                    quoted(-1.0 / (angular_hz * farad), "ohm")
                ));
            }
            Some(Element::Resistor(_)) | None => {}
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
    fn reads_back_to_the_same_stage() {
        let text = r#"
            title = "a \"quoted\" title"
            frequency = "169.4 MHz"
            supply = { voltage = "6 V" }
            switch = { closed_resistance = "0.12 ohm", open_resistance = "50 kohm" }
            drain = { capacitance = "75.1234567 pF" }
            driver = { duty = 0.45, anchor = "trailing" }
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
        assert!(near(stage.drain_f, again.drain_f));
        assert_eq!(stage.ladder.len(), again.ladder.len());
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
