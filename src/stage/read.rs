//! Stage files: TOML to [`Stage`]. Keys are described in `docs/formats.md`.

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::load::{magnitude_of_vswr, reactance_element};
use super::read_device::{Drain, diode, drain, gate, knee};
use super::{
    Anchor, Arm, Arrangement, Device, Driver, Element, Feed, Load, Part, Rung, Stage, Switch,
};
use crate::input::{Document, Files, Problem, Range, Section};
use crate::units::Dimension;

/// The anchors by their names in files.
const ANCHORS: [(&str, Anchor); 3] = [
    ("leading", Anchor::Leading),
    ("centre", Anchor::Centre),
    ("trailing", Anchor::Trailing),
];

/// The largest reflection coefficient of a load: a standing-wave ratio of 199.
const MOST_REFLECTION: f64 = 0.99;

/// Duties that leave both a closed and an open interval worth the name.
const DUTY: Range = Range::Within(0.01, 0.99);

impl Stage {
    /// Reads the stage in `text`, which came from `file`, and the tables it names from `files`. Names of tables
    /// are relative to the folder of `file`.
    ///
    /// # Errors
    /// The first thing wrong, with its place.
    pub fn read(file: &str, text: &str, files: &dyn Files) -> Result<Self, Problem> {
        Self::parse_from(file, file, text, Some(files))
    }

    /// As [`Stage::read`], where `files` know the file as `name` and messages show it as `shown`.
    ///
    /// # Errors
    /// The first thing wrong, with its place.
    pub fn read_as(
        shown: &str,
        name: &str,
        text: &str,
        files: &dyn Files,
    ) -> Result<Self, Problem> {
        Self::parse_from(shown, name, text, Some(files))
    }

    /// Reads the stage in `text`, which came from `file` and names no tables.
    ///
    /// # Errors
    /// The first thing wrong, with its place.
    pub fn parse(file: &str, text: &str) -> Result<Self, Problem> {
        Self::parse_from(file, file, text, None)
    }

    fn parse_from(
        shown: &str,
        name: &str,
        text: &str,
        files: Option<&dyn Files>,
    ) -> Result<Self, Problem> {
        let document = Document::parse(shown, text)?;
        let root = document.root();
        let frequency_hz = root.quantity("frequency", Dimension::Frequency, Range::Positive)?;
        let title = root.maybe_text("title")?.unwrap_or(shown).to_owned();

        let supply = root.section("supply")?;
        let supply_v = supply.quantity("voltage", Dimension::Voltage, Range::Positive)?;
        supply.finish()?;

        let folder = name.rsplit_once('/').map(|(folder, _)| folder);
        let drain = drain(&root.section("drain")?, files, folder)?;

        let load_section = root.section("load")?;
        let (ladder, load) = load(&load_section, frequency_hz)?;
        load_section.finish()?;

        let switch = switch(&root.section("switch")?)?;
        let driver = driver(root.maybe_section("driver")?)?;
        let feed = match switch.arrangement {
            Arrangement::Single => feed(&root.section("feed")?)?,
            Arrangement::Pair { .. } if root.has("feed") => {
                return Err(root.problem(
                    "feed",
                    "no [feed] with arrangement = \"pair\": its upper switch stands at the supply itself",
                ));
            }
            Arrangement::Pair { .. } => Feed::Direct,
        };
        let stage = Self {
            title,
            frequency_hz,
            supply_v,
            switch,
            drain_f: drain.farad,
            drain_curve: drain.curve,
            gate_coupling_f: drain.gate_coupling_f,
            driver,
            feed,
            ladder,
            load,
        };
        stage.pair_fits(&root)?;
        if stage.gate_coupling_f > 0.0 && stage.driver.gate.is_none() {
            let section = root.section("drain")?;
            return Err(section.problem(
                "gate_coupling",
                "gate_coupling only where [driver] has a swing with rise and fall",
            ));
        }
        root.finish()?;
        Ok(stage)
    }
}

impl Stage {
    /// Whether what only a single switch, or only a pair, can have stands in the right kind of stage.
    fn pair_fits(&self, root: &Section<'_>) -> Result<(), Problem> {
        if !self.is_pair() {
            return match root.maybe_section("driver")? {
                Some(driver) if driver.has("dead_time") => Err(driver.problem(
                    "dead_time",
                    "dead_time only with [switch] arrangement = \"pair\"",
                )),
                _ => Ok(()),
            };
        }
        let (switch, drain) = (root.section("switch")?, root.section("drain")?);
        let only_single = |section: &Section<'_>, key: &'static str| {
            let what = format!("no {key} with arrangement = \"pair\": a pair is solved as linear");
            Err(section.problem(key, what))
        };
        for key in ["diode", "knee"] {
            if switch.has(key) {
                return only_single(&switch, key);
            }
        }
        for key in ["junction", "table", "gate_coupling"] {
            if drain.has(key) {
                return only_single(&drain, key);
            }
        }
        let (period_s, dead_s) = (self.period_s(), self.driver.dead_s);
        let shortest_s = self.driver.duty.min(1.0 - self.driver.duty) * period_s;
        if dead_s >= shortest_s {
            let driver = root.section("driver")?;
            return Err(driver.problem(
                "dead_time",
                format!(
                    "less than the shorter part of the pulse, {}",
                    crate::units::show(shortest_s, "s", 4)
                ),
            ));
        }
        Ok(())
    }
}

impl Device {
    /// Reads a device in `text`, shown as `shown` and known to `files` as `name`: the tables `[switch]`, `[drain]`
    /// and `[driver]` of a stage file, without duty and anchor.
    ///
    /// # Errors
    /// The first thing wrong, with its place.
    pub fn read_as(
        shown: &str,
        name: &str,
        text: &str,
        files: &dyn Files,
    ) -> Result<Self, Problem> {
        let document = Document::parse(shown, text)?;
        let root = document.root();
        root.maybe_text("title")?;
        let folder = name.rsplit_once('/').map(|(folder, _)| folder);
        let drain = match root.maybe_section("drain")? {
            Some(section) => drain(&section, Some(files), folder)?,
            None => Drain {
                farad: 0.0,
                curve: None,
                gate_coupling_f: 0.0,
            },
        };
        let gate = match root.maybe_section("driver")? {
            Some(section) => {
                let gate = gate(&section)?;
                section.finish()?;
                gate
            }
            None => None,
        };
        if drain.gate_coupling_f > 0.0 && gate.is_none() {
            return Err(root.section("drain")?.problem(
                "gate_coupling",
                "gate_coupling only where [driver] has a swing with rise and fall",
            ));
        }
        let section = root.section("switch")?;
        let switch = switch(&section)?;
        if switch.arrangement != Arrangement::Single {
            return Err(section.problem("arrangement", "\"single\" for a device to design with"));
        }
        let device = Self {
            switch,
            drain_f: drain.farad,
            drain_curve: drain.curve,
            gate_coupling_f: drain.gate_coupling_f,
            gate,
        };
        root.finish()?;
        Ok(device)
    }
}

fn switch(section: &Section<'_>) -> Result<Switch, Problem> {
    let closed_ohm =
        section.quantity("closed_resistance", Dimension::Resistance, Range::Positive)?;
    let open_ohm = section
        .maybe_quantity("open_resistance", Dimension::Resistance, Range::Positive)?
        .unwrap_or(f64::INFINITY);
    if open_ohm <= closed_ohm {
        return Err(section.problem("open_resistance", "more than closed_resistance"));
    }
    let pair = section
        .maybe_choice("arrangement", &[("single", false), ("pair", true)])?
        .unwrap_or(false);
    let upper =
        section.maybe_quantity("upper_resistance", Dimension::Resistance, Range::Positive)?;
    let arrangement = match (pair, upper) {
        (false, Some(_)) => {
            return Err(section.problem(
                "upper_resistance",
                "upper_resistance only with arrangement = \"pair\"",
            ));
        }
        (false, None) => Arrangement::Single,
        (true, upper) => Arrangement::Pair {
            upper_ohm: upper.unwrap_or(closed_ohm),
        },
    };
    if let Arrangement::Pair { upper_ohm } = arrangement
        && open_ohm <= upper_ohm
    {
        return Err(section.problem("open_resistance", "more than upper_resistance"));
    }
    let knee = knee(section)?;
    let diode = diode(section)?;
    section.finish()?;
    Ok(Switch {
        closed_ohm,
        open_ohm,
        knee,
        diode,
        arrangement,
    })
}

fn driver(section: Option<Section<'_>>) -> Result<Driver, Problem> {
    let mut driver = Driver {
        duty: 0.5,
        anchor: Anchor::Centre,
        gate: None,
        dead_s: 0.0,
    };
    if let Some(section) = section {
        driver.duty = section
            .maybe_quantity("duty", Dimension::Ratio, DUTY)?
            .unwrap_or(driver.duty);
        driver.anchor = section
            .maybe_choice("anchor", &ANCHORS)?
            .unwrap_or(driver.anchor);
        driver.gate = gate(&section)?;
        driver.dead_s = section
            .maybe_quantity("dead_time", Dimension::Time, Range::NotNegative)?
            .unwrap_or(0.0);
        section.finish()?;
    }
    Ok(driver)
}

fn feed(section: &Section<'_>) -> Result<Feed, Problem> {
    let ohm = section
        .maybe_quantity("resistance", Dimension::Resistance, Range::NotNegative)?
        .unwrap_or(0.0);
    let choke = section.maybe_flag("choke")?.unwrap_or(false);
    let feed = match section.maybe_quantity("inductance", Dimension::Inductance, Range::Positive)? {
        Some(_) if choke => {
            return Err(section.problem("choke", "either inductance or choke = true, not both"));
        }
        Some(henry) => Feed::Inductor { henry, ohm },
        None if choke => Feed::Choke { ohm },
        None => return Err(section.problem("inductance", "an inductance, or choke = true")),
    };
    section.finish()?;
    Ok(feed)
}

fn load(section: &Section<'_>, frequency_hz: f64) -> Result<(Vec<Rung>, Load), Problem> {
    let ohm = section.quantity("resistance", Dimension::Resistance, Range::Positive)?;
    let reactance_ohm = section.maybe_quantity("reactance", Dimension::Resistance, Range::Any)?;
    let load = match section.maybe_section("reflection")? {
        Some(_) if reactance_ohm.is_some() => {
            return Err(section.problem("reflection", "either reactance or reflection, not both"));
        }
        Some(reflection) => Load::reflecting(gamma(&reflection)?, ohm, frequency_hz),
        None => Load {
            reactance: reactance_element(reactance_ohm.unwrap_or(0.0), frequency_hz),
            ..Load::matched(ohm)
        },
    };
    let ladder = section
        .sections("ladder")?
        .iter()
        .map(|section| rung(section, TAU * frequency_hz))
        .collect::<Result<_, _>>()?;
    Ok((ladder, load))
}

/// A reflection coefficient: its magnitude or the standing-wave ratio, and its angle.
fn gamma(section: &Section<'_>) -> Result<Complex64, Problem> {
    let magnitude = section.maybe_quantity(
        "magnitude",
        Dimension::Ratio,
        Range::Within(0.0, MOST_REFLECTION),
    )?;
    let most = (1.0 + MOST_REFLECTION) / (1.0 - MOST_REFLECTION);
    let vswr =
        section.maybe_quantity("vswr", Dimension::Ratio, Range::Within(1.0, most.round()))?;
    let magnitude = match (magnitude, vswr) {
        (Some(magnitude), None) => magnitude,
        (None, Some(vswr)) => magnitude_of_vswr(vswr),
        (Some(_), Some(_)) => {
            return Err(section.problem("vswr", "either magnitude or vswr, not both"));
        }
        (None, None) => return Err(section.problem("magnitude", "magnitude or vswr")),
    };
    let angle_rad = section.quantity("angle", Dimension::Angle, Range::Any)?;
    section.finish()?;
    Ok(Complex64::from_polar(magnitude, angle_rad))
}

fn rung(section: &Section<'_>, angular_hz: f64) -> Result<Rung, Problem> {
    let mut found = Vec::new();
    for (key, arm) in [
        ("series", Arm::Series),
        ("shunt", Arm::Shunt),
        ("tank", Arm::Tank),
    ] {
        if let Some(section) = section.maybe_section(key)? {
            found.push((arm, section));
        }
    }
    section.finish()?;
    let one_of = "exactly one of series, shunt, tank in each [[load.ladder]]";
    if found.len() != 1 {
        let given: Vec<&str> = section.keys().collect();
        let given = if given.is_empty() {
            "none of them".to_owned()
        } else {
            given.join(" and ")
        };
        return Err(section.problem_here(given, one_of));
    }
    let (arm, section) = found.remove(0);
    Ok(Rung {
        arm,
        parts: parts(&section, arm, angular_hz)?,
    })
}

/// The parts of one rung. `q` belongs to the inductor, or to the capacitor where it is alone;
/// `capacitor_q` to the capacitor beside an inductor; `resistance` is a part of its own where it
/// stands alone or in a tank, else the series resistance of the inductor or capacitor.
fn parts(section: &Section<'_>, arm: Arm, angular_hz: f64) -> Result<Vec<Part>, Problem> {
    let inductance =
        section.maybe_quantity("inductance", Dimension::Inductance, Range::Positive)?;
    let capacitance =
        section.maybe_quantity("capacitance", Dimension::Capacitance, Range::Positive)?;
    let resistance =
        section.maybe_quantity("resistance", Dimension::Resistance, Range::Positive)?;
    let q = section.maybe_quantity("q", Dimension::Ratio, Range::Positive)?;
    let capacitor_q = section.maybe_quantity("capacitor_q", Dimension::Ratio, Range::Positive)?;
    section.finish()?;
    if q.is_some() && inductance.is_none() && capacitance.is_none() {
        return Err(section.problem("q", "q only beside an inductance or a capacitance"));
    }
    if capacitor_q.is_some() && (capacitance.is_none() || inductance.is_none()) {
        return Err(section.problem(
            "capacitor_q",
            "capacitor_q only where inductance and capacitance stand in one rung; q otherwise",
        ));
    }
    let mut parts = Vec::new();
    if let Some(henry) = inductance {
        let loss_ohm = q.map_or(0.0, |q| angular_hz * henry / q);
        parts.push(Part {
            element: Element::Inductor(henry),
            loss_ohm,
        });
    }
    if let Some(farad) = capacitance {
        let q = if inductance.is_some() { capacitor_q } else { q };
        let loss_ohm = q.map_or(0.0, |q| 1.0 / (angular_hz * farad * q));
        parts.push(Part {
            element: Element::Capacitor(farad),
            loss_ohm,
        });
    }
    if let Some(ohm) = resistance {
        parts.push(Part {
            element: Element::Resistor(ohm),
            loss_ohm: 0.0,
        });
    }
    match (parts.len(), arm) {
        (0, _) => {
            Err(section.problem_here("an empty table", "inductance, capacitance or resistance"))
        }
        (1, Arm::Tank) => Err(section.problem_here(
            "one part",
            "at least two of inductance, capacitance, resistance in a tank",
        )),
        _ => Ok(parts),
    }
}
