//! A study file and the files it names.

use crate::drive::{Combining, NoInverse, Polynomial, Rails, Scheme};
use crate::input::{Document, Files, Problem, Range, Section};
use crate::limits::{Limits, LimitsRequest};
use crate::map::{Control, Map, MapFacts, MapFormat, read_map};
use crate::math::Window;
use crate::metrics::SymbolFormat;
use crate::orbit::Joined;
use crate::predistort::{Table, TableRequest, read_polynomial, read_table};
use crate::signal::FormatOptions;
use crate::stage::{Anchor, Stage};
use crate::units::{self, Dimension};

/// One study, ready to be carried out; the signal is still a file.
#[derive(Debug, Clone)]
pub struct Study {
    /// What the user calls it.
    pub title: String,
    /// Remarks of the user, shown in the report.
    pub note: Option<String>,
    /// What transmits.
    pub hardware: Hardware,
    /// The file that it came from, relative to the study.
    pub hardware_file: String,
    /// What is transmitted.
    pub signal: SignalChoice,
    /// How it moves the controls.
    pub scheme: Scheme,
    /// What stands in front of the scheme.
    pub predistort: Option<Predistortion>,
    /// What it is held against.
    pub limits: Limits,
    /// Window of the spectra.
    pub window: Window,
    /// Resolution of the spectrum that is shown, Hz, where the user wants a finer one than the limits need.
    pub resolution_hz: Option<f64>,
    /// The study file's own text, to repeat it.
    pub text: String,
}

/// What transmits.
#[derive(Debug, Clone)]
pub enum Hardware {
    /// A stage, to be solved.
    Stage(Box<Stage>),
    /// A map from a file.
    Map(Box<Map>),
}

impl Hardware {
    /// Full range of the supply, V.
    pub fn full_supply_v(&self) -> f64 {
        match self {
            Self::Stage(stage) => stage.supply_v,
            Self::Map(map) => map.domain().1,
        }
    }

    /// Which edge of the pulses stays; the middle for a map from a file.
    pub fn anchor(&self) -> Anchor {
        match self {
            Self::Stage(stage) => stage.driver.anchor,
            Self::Map(_) => Anchor::Centre,
        }
    }

    /// Carrier, Hz.
    pub fn frequency_hz(&self) -> f64 {
        match self {
            Self::Stage(stage) => stage.frequency_hz,
            Self::Map(map) => map.frequency_hz(),
        }
    }

    /// Load resistance, ohm.
    pub fn load_ohm(&self) -> f64 {
        match self {
            Self::Stage(stage) => stage.load.ohm,
            Self::Map(map) => map.load_ohm(),
        }
    }
}

/// What stands in front of the scheme.
#[derive(Debug, Clone, PartialEq)]
pub enum Predistortion {
    /// A table from a file.
    Table(Table),
    /// A table to be made from the map.
    Request(TableRequest),
    /// A polynomial from a file.
    Polynomial(Polynomial),
}

/// What is transmitted.
#[derive(Debug, Clone, PartialEq)]
pub struct SignalChoice {
    /// Relative to the study.
    pub file: String,
    /// As the study states it.
    pub options: FormatOptions,
    /// Signal full scale as a fraction of the control's full range.
    pub level: f64,
    /// The signal's format, where the study states it: `[signal.format]`.
    pub format: Option<SymbolFormat>,
}

const WINDOWS: [(&str, Window); 4] = [
    ("blackman_harris", Window::BlackmanHarris),
    ("hann", Window::Hann),
    ("flat_top", Window::FlatTop),
    ("kaiser", Window::Kaiser(12.0)),
];

impl Study {
    /// Full range of the scheme's control: V of the supply, part of the period, or 1 of the drive.
    pub fn full_control(&self) -> f64 {
        match (self.scheme.control(), &self.hardware) {
            (Control::Supply, hardware) => hardware.full_supply_v(),
            (Control::Width, Hardware::Stage(stage)) => stage.driver.duty,
            (Control::Width, Hardware::Map(map)) => map.domain().1,
            (Control::Drive, _) => 1.0,
            (Control::Angle, _) => std::f64::consts::FRAC_PI_2,
        }
    }

    /// What the words of a table in front of the scheme stand for, and their full range: the supply, V, or the
    /// magnitude that the scheme's own law is given, 1.
    pub fn table_range(&self) -> (Control, f64) {
        match &self.scheme {
            Scheme::Supply(_) => (Control::Supply, self.full_control()),
            _ => (Control::Drive, 1.0),
        }
    }

    /// Reads the study `name` and the stage or map and limits that it names.
    ///
    /// # Errors
    /// The first thing wrong in any of the files, with its place; more than one `[[scheme]]`.
    pub fn read(name: &str, files: &dyn Files) -> Result<Self, Problem> {
        Self::read_with(name, files, Several::Refused)?
            .pop()
            .ok_or_else(|| unreachable_study(name))
    }

    /// The same with any number of `[[scheme]]`: one study for each, with the same hardware, signal and limits.
    ///
    /// # Errors
    /// The first thing wrong in any of the files, with its place.
    pub fn read_all(name: &str, files: &dyn Files) -> Result<Vec<Self>, Problem> {
        Self::read_with(name, files, Several::Allowed)
    }

    fn read_with(name: &str, files: &dyn Files, several: Several) -> Result<Vec<Self>, Problem> {
        let shown = files.display(name);
        let text = files
            .text(name)
            .map_err(|error| Problem::unreadable(&shown, &error, "a study file, TOML in UTF-8"))?;
        let document = Document::parse(&shown, &text)?;
        let root = document.root();
        let signal = root.section("signal")?;
        let sections = match root.sections("scheme") {
            Ok(sections) if sections.len() > 1 => {
                if matches!(several, Several::Refused) {
                    return Err(root.problem(
                        "scheme",
                        "one table [scheme]; `quietedge compare` takes several [[scheme]]",
                    ));
                }
                sections
            }
            Ok(sections) if sections.len() == 1 => sections,
            _ => vec![root.section("scheme")?],
        };
        let metrics = root.maybe_section("metrics")?;
        let (window, resolution_hz) = match &metrics {
            Some(section) => spectrum_settings(section)?,
            None => (Window::BlackmanHarris, None),
        };
        let hardware = hardware(&root, files)?;
        let title = root.maybe_text("title")?.unwrap_or(name).to_owned();
        let first = sections.first().ok_or_else(|| unreachable_study(name))?;
        let study = Self {
            title,
            note: root.maybe_text("note")?.map(str::to_owned),
            hardware_file: if root.has("stage") {
                root.text("stage")?.to_owned()
            } else {
                map_choice(&root)?.0.to_owned()
            },
            hardware,
            signal: signal_choice(&signal)?,
            scheme: Scheme::read(first)?,
            predistort: root
                .maybe_section("predistort")?
                .map(|section| predistortion(&section, files))
                .transpose()?,
            limits: match root.maybe_section("limits")? {
                Some(section) => LimitsRequest::read(&section, files)?,
                None => Limits::default(),
            },
            window,
            resolution_hz,
            text: text.clone(),
        };
        root.finish()?;
        let mut studies = Vec::with_capacity(sections.len());
        for section in &sections {
            let study = Self {
                scheme: Scheme::read(section)?.loaded(section, files)?,
                ..study.clone()
            };
            study.fits(section)?;
            studies.push(study);
        }
        Ok(studies)
    }

    /// Whether hardware and predistortion go with the scheme.
    fn fits(&self, scheme: &Section<'_>) -> Result<(), Problem> {
        let wanted = self.scheme.control();
        match &self.hardware {
            Hardware::Stage(stage) => {
                if let Scheme::Outphase(outphase) = &self.scheme
                    && let Combining::Joined(joined) = &outphase.combining
                    && let Err(error) = Joined::new(stage, &joined.joint)
                {
                    let allowed = format!("\"joined\" where two stages can be ({error})");
                    return Err(scheme.problem("combining", allowed));
                }
            }
            Hardware::Map(_) if wanted == Control::Angle => {
                return Err(scheme.problem(
                    "combining",
                    "\"isolated\" with a map from a file: joined stages are solved together, from a stage",
                ));
            }
            Hardware::Map(map) if wanted != Control::Drive && map.control() != wanted => {
                return Err(scheme.problem(
                    "kind",
                    format!(
                        "a scheme that moves the map's control, {}",
                        map.control().name()
                    ),
                ));
            }
            _ => {}
        }
        self.supplies_fit(scheme)?;
        let refused = match &self.predistort {
            None => None,
            Some(Predistortion::Request(_)) => self.scheme.invertible().err(),
            // From captures or learned: they may mend what the inverse of the map leaves.
            Some(Predistortion::Table(_) | Predistortion::Polynomial(_)) => {
                self.scheme.table_place().err().map(NoInverse::from)
            }
        };
        if let Some(reason) = refused {
            let key = match reason {
                NoInverse::AlreadyInverse { .. } if scheme.has("law") => "law",
                _ => "kind",
            };
            let allowed = format!("a scheme that [predistort] works on ({reason})");
            return Err(scheme.problem(key, allowed));
        }
        Ok(())
    }
}

impl Study {
    /// Whether rails and the modulator's input go with the full supply, and the map knows the current they need.
    fn supplies_fit(&self, scheme: &Section<'_>) -> Result<(), Problem> {
        let full_v = match &self.hardware {
            Hardware::Stage(stage) => stage.supply_v,
            Hardware::Map(map) => map.own_supply_v(),
        };
        let shown = units::show(full_v, "V", 6);
        match &self.scheme {
            Scheme::Levels(levels) => {
                if let Rails::Volts(volts) = &levels.rails
                    && volts
                        .last()
                        .is_none_or(|top| (top / full_v - 1.0).abs() > 1e-6)
                {
                    return Err(scheme.problem(
                        "rail_voltages",
                        format!("voltages that rise to the full supply of {shown}"),
                    ));
                }
            }
            Scheme::Supply(supply) => {
                let modulator = &supply.modulator;
                if modulator
                    .power
                    .input_v()
                    .is_some_and(|input_v| input_v < full_v)
                {
                    return Err(scheme.problem(
                        "modulator",
                        format!("a power.input of the full supply, {shown}, or more"),
                    ));
                }
                if let Hardware::Map(map) = &self.hardware
                    && modulator.output_ohm > 0.0
                    && map.supply_curve_a().is_none()
                {
                    return Err(scheme.problem(
                        "modulator",
                        "no output_resistance with a map that has no supply_a: the stage's current is not known",
                    ));
                }
            }
            _ => {}
        }
        Ok(())
    }
}

/// Whether a study may have more than one scheme.
#[derive(Debug, Clone, Copy)]
enum Several {
    Allowed,
    Refused,
}

fn unreachable_study(name: &str) -> Problem {
    let error = std::io::Error::other("it holds no scheme");
    Problem::unreadable(name, &error, "a study with a [scheme]")
}

fn signal_choice(section: &Section<'_>) -> Result<SignalChoice, Problem> {
    let choice = SignalChoice {
        file: section.text("file")?.to_owned(),
        options: FormatOptions::from_study(section)?,
        level: section.quantity("level", Dimension::Ratio, Range::UpTo(0.0, 1.0))?,
        format: match section.maybe_section("format") {
            // A word there is the file's format, a table the signal's.
            Ok(Some(table)) => Some(SymbolFormat::read(&table)?),
            Ok(None) | Err(_) => None,
        },
    };
    section.finish()?;
    Ok(choice)
}

fn predistortion(section: &Section<'_>, files: &dyn Files) -> Result<Predistortion, Problem> {
    let opened = |key: &'static str, name: &str| {
        let shown = files.display(name);
        files.open(name).map_err(|error| {
            section.problem(key, format!("a file that can be read ({shown}: {error})"))
        })
    };
    if let Some(name) = section.maybe_text("polynomial")? {
        let reader = opened("polynomial", name)?;
        let polynomial = read_polynomial(&files.display(name), reader)?;
        // Keys of a table beside it are refused.
        section.finish()?;
        return Ok(Predistortion::Polynomial(polynomial));
    }
    let choice = match section.maybe_text("table")? {
        None => Predistortion::Request(TableRequest::read(section)?),
        Some(name) => {
            let shown = files.display(name);
            let reader = opened("table", name)?;
            Predistortion::Table(read_table(&shown, reader)?)
        }
    };
    section.finish()?;
    Ok(choice)
}

fn spectrum_settings(section: &Section<'_>) -> Result<(Window, Option<f64>), Problem> {
    let window = section
        .maybe_choice("window", &WINDOWS)?
        .unwrap_or(Window::BlackmanHarris);
    let resolution = section.maybe_quantity("resolution", Dimension::Frequency, Range::Positive)?;
    section.finish()?;
    Ok((window, resolution))
}

fn hardware(root: &Section<'_>, files: &dyn Files) -> Result<Hardware, Problem> {
    let (has_stage, has_map) = (root.has("stage"), root.has("map"));
    if has_stage == has_map {
        let key = if has_stage { "map" } else { "stage" };
        return Err(root.problem(key, "one of: stage = \"file\" or map = \"file\""));
    }
    if has_stage {
        let name = root.text("stage")?;
        let shown = files.display(name);
        let text = files.text(name).map_err(|error| {
            root.problem(
                "stage",
                format!("a file that can be read ({shown}: {error})"),
            )
        })?;
        return Ok(Hardware::Stage(Box::new(Stage::read_as(
            &shown, name, &text, files,
        )?)));
    }
    let (name, facts) = map_choice(root)?;
    let shown = files.display(name);
    let format = match name.rsplit('.').next() {
        Some("csv") => MapFormat::Csv,
        Some("json") => MapFormat::Json,
        _ => return Err(root.problem("map", "a file named *.csv or *.json")),
    };
    let reader = files.open(name).map_err(|error| {
        root.problem("map", format!("a file that can be read ({shown}: {error})"))
    })?;
    Ok(Hardware::Map(Box::new(read_map(
        &shown, format, reader, &facts,
    )?)))
}

/// `map = "file"` or a table with the facts that the file does not hold.
fn map_choice<'a>(root: &Section<'a>) -> Result<(&'a str, MapFacts), Problem> {
    let Ok(Some(section)) = root.maybe_section("map") else {
        return Ok((root.text("map")?, MapFacts::default()));
    };
    let controls = [("supply", Control::Supply), ("width", Control::Width)];
    let positive = |key, dimension| section.maybe_quantity(key, dimension, Range::Positive);
    let facts = MapFacts {
        control: section.maybe_choice("control", &controls)?,
        load_ohm: positive("load_resistance", Dimension::Resistance)?,
        frequency_hz: positive("frequency", Dimension::Frequency)?,
        supply_v: positive("supply", Dimension::Voltage)?,
    };
    let file = section.text("file")?;
    section.finish()?;
    Ok((file, facts))
}
