//! What a study asks for: its table `[limits]`.

use serde::Serialize;

use super::library::Library;
use super::read_rows::{percent, rrc};
use super::set::LimitSet;
use crate::input::{Files, Problem, Range, Section};
use crate::metrics::ChannelFilter;
use crate::units::Dimension;

/// One limit on the power in a pair of neighbouring channels, stated in the study.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct AcprLimit {
    /// Centre to centre, Hz.
    pub offset_hz: f64,
    /// How the neighbours are read.
    pub filter: ChannelFilter,
    /// How the wanted channel is read.
    pub main: ChannelFilter,
    /// dB against the wanted channel, negative.
    pub limit_db: f64,
}

/// Everything a verdict is held against.
#[derive(Debug, Clone, PartialEq, Default, Serialize)]
pub struct Limits {
    /// Named sets, in the order of the study.
    pub sets: Vec<LimitSet>,
    /// Highest RMS error vector magnitude, percent.
    pub evm_percent: Option<f64>,
    /// Highest peak error vector magnitude, percent.
    pub evm_peak_percent: Option<f64>,
    /// Highest drain voltage that the device is rated for, V.
    pub peak_voltage_v: Option<f64>,
    /// Highest switch current that the device is rated for, A.
    pub peak_current_a: Option<f64>,
    /// Limits on neighbouring channels.
    pub acpr: Vec<AcprLimit>,
    /// Channel width, Hz.
    pub channel_hz: Option<f64>,
    /// Authorized bandwidth, Hz.
    pub authorized_bandwidth_hz: Option<f64>,
    /// Power of the carrier without modulation, W.
    pub carrier_w: Option<f64>,
    /// Equipment classes, one word at most for each set.
    pub classes: Vec<String>,
    /// As the set calls it.
    pub modulation: Option<String>,
    /// Code rate, as the set writes it.
    pub coding: Option<String>,
}

impl Limits {
    /// Nothing but the set `set`.
    pub fn of_set(set: LimitSet) -> Self {
        Self {
            sets: vec![set],
            ..Self::default()
        }
    }

    /// True where there is nothing to hold a signal against.
    pub fn is_empty(&self) -> bool {
        self.sets.is_empty()
            && self.acpr.is_empty()
            && self.evm_percent.is_none()
            && self.evm_peak_percent.is_none()
            && self.peak_voltage_v.is_none()
            && self.peak_current_a.is_none()
    }

    /// The word for equipment that `set` knows, if one of them was stated.
    pub fn class_for(&self, set: &LimitSet) -> Option<&str> {
        let known = set.classes();
        self.classes
            .iter()
            .map(String::as_str)
            .find(|word| known.contains(word))
    }
}

/// Reads `[limits]`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct LimitsRequest;

impl LimitsRequest {
    /// The limits that the table `[limits]` of a study asks for. The sets of the files it names join
    /// the published ones; where it names no sets, it means all sets of its files.
    ///
    /// # Errors
    /// The first thing that is wrong: an unknown set, a file that cannot be read, a condition that a
    /// set needs and nobody stated.
    pub fn read(section: &Section<'_>, files: &dyn Files) -> Result<Limits, Problem> {
        let mut library = Library::published()?;
        let mut own = Vec::new();
        for name in section.texts("files")? {
            let shown = files.display(name);
            let text = files.text(name).map_err(|error| {
                section.problem(
                    "files",
                    format!("files that can be read ({shown}: {error})"),
                )
            })?;
            own.extend(library.add(&shown, &text)?);
        }
        let named = section.texts("sets")?;
        let names: Vec<&str> = if section.has("sets") {
            named
        } else {
            own.iter().map(String::as_str).collect()
        };
        let mut sets: Vec<LimitSet> = Vec::new();
        for name in names {
            let set = library.find(name).map_err(|unknown| {
                let problem = section.problem(
                    "sets",
                    format!(
                        "names of limit sets (`quietedge limits` lists them); there is none called \"{name}\""
                    ),
                );
                match unknown.nearest {
                    Some(near) => problem.with_hint(format!("did you mean \"{near}\"?")),
                    None => problem,
                }
            })?;
            if !sets.contains(set) {
                sets.push(set.clone());
            }
        }
        let hertz = |key| section.maybe_quantity(key, Dimension::Frequency, Range::Positive);
        let classes = match section.texts("class") {
            Ok(words) => words,
            Err(problem) => vec![section.text("class").map_err(|_| problem)?],
        };
        let limits = Limits {
            sets,
            evm_percent: percent(section, "evm_percent")?,
            evm_peak_percent: percent(section, "evm_peak_percent")?,
            peak_voltage_v: section.maybe_quantity(
                "peak_voltage",
                Dimension::Voltage,
                Range::Positive,
            )?,
            peak_current_a: section.maybe_quantity(
                "peak_current",
                Dimension::Current,
                Range::Positive,
            )?,
            acpr: section
                .sections("acpr")?
                .iter()
                .map(acpr)
                .collect::<Result<_, Problem>>()?,
            channel_hz: hertz("channel")?,
            authorized_bandwidth_hz: hertz("authorized_bandwidth")?,
            carrier_w: section.maybe_quantity(
                "carrier_power",
                Dimension::Power,
                Range::Positive,
            )?,
            classes: classes.into_iter().map(str::to_owned).collect(),
            modulation: section.maybe_text("modulation")?.map(str::to_owned),
            coding: section.maybe_text("coding")?.map(str::to_owned),
        };
        section.finish()?;
        limits.complete().map_err(|unmet| {
            let problem = section.problem(unmet.key, unmet.allowed);
            match unmet.nearest {
                Some(near) => problem.with_hint(format!("did you mean \"{near}\"?")),
                None => problem,
            }
        })?;
        Ok(limits)
    }
}

fn acpr(row: &Section<'_>) -> Result<AcprLimit, Problem> {
    let hertz = |key| row.maybe_quantity(key, Dimension::Frequency, Range::Positive);
    let flat = hertz("bandwidth")?;
    let shaped = rrc(row, "symbol_rate", "rolloff")?;
    let filter = match (flat, shaped) {
        (Some(bandwidth_hz), None) => ChannelFilter::Flat { bandwidth_hz },
        (None, Some(filter)) => filter,
        (Some(_), Some(_)) => {
            return Err(row.problem(
                "bandwidth",
                "bandwidth, or symbol_rate and rolloff, not both",
            ));
        }
        (None, None) => {
            return Err(row.problem(
                "bandwidth",
                "the width of a flat filter, or symbol_rate and rolloff of a root-raised-cosine one",
            ));
        }
    };
    let main = hertz("main_bandwidth")?
        .map_or(filter, |bandwidth_hz| ChannelFilter::Flat { bandwidth_hz });
    let limit = AcprLimit {
        offset_hz: row.quantity("offset", Dimension::Frequency, Range::Positive)?,
        filter,
        main,
        limit_db: row.quantity("limit", Dimension::Decibel, Range::Between(-300.0, 0.0))?,
    };
    row.finish()?;
    Ok(limit)
}
