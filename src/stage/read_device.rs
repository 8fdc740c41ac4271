//! The parts of a stage file that describe the real switch: knee, diode, drain capacitance, gate.

use super::{Diode, DrainCurve, Gate, Junction, Knee};
use crate::input::{Files, Problem, Range, Section};
use crate::units::Dimension;

/// The most points a table of capacitance may have: far more than any datasheet curve needs.
const MAX_TABLE_POINTS: usize = 2000;

/// The sharpness of a knee that the file gives none for.
const SHARPNESS: f64 = 4.0;

/// The `[drain]` table.
pub struct Drain {
    pub farad: f64,
    pub curve: Option<DrainCurve>,
    pub gate_coupling_f: f64,
}

pub fn knee(section: &Section<'_>) -> Result<Option<Knee>, Problem> {
    let Some(section) = section.maybe_section("knee")? else {
        return Ok(None);
    };
    let knee = Knee {
        current_a: section.quantity("current", Dimension::Current, Range::Positive)?,
        sharpness: section
            .maybe_quantity("sharpness", Dimension::Ratio, Range::Within(2.0, 20.0))?
            .unwrap_or(SHARPNESS),
    };
    section.finish()?;
    Ok(Some(knee))
}

pub fn diode(section: &Section<'_>) -> Result<Option<Diode>, Problem> {
    let Some(section) = section.maybe_section("diode")? else {
        return Ok(None);
    };
    let diode = Diode {
        drop_v: section.quantity("drop", Dimension::Voltage, Range::NotNegative)?,
        ohm: section.quantity("resistance", Dimension::Resistance, Range::Positive)?,
    };
    section.finish()?;
    Ok(Some(diode))
}

/// The gate of the `[driver]` table; the section is left for the caller to finish.
pub fn gate(section: &Section<'_>) -> Result<Option<Gate>, Problem> {
    let Some(swing_v) = section.maybe_quantity("swing", Dimension::Voltage, Range::Positive)?
    else {
        for key in ["rise", "fall", "gate_charge"] {
            if section.has(key) {
                return Err(section.problem(key, "only beside a swing"));
            }
        }
        return Ok(None);
    };
    let rise_s = section.quantity("rise", Dimension::Time, Range::Positive)?;
    let fall_s = section
        .maybe_quantity("fall", Dimension::Time, Range::Positive)?
        .unwrap_or(rise_s);
    let charge_c = section
        .maybe_quantity("gate_charge", Dimension::Charge, Range::NotNegative)?
        .unwrap_or(0.0);
    Ok(Some(Gate {
        swing_v,
        rise_s,
        fall_s,
        charge_c,
    }))
}

/// The `[drain]` table; `files` hold its table of capacitance, relative to `folder`.
pub fn drain(
    section: &Section<'_>,
    files: Option<&dyn Files>,
    folder: Option<&str>,
) -> Result<Drain, Problem> {
    let junction = section
        .maybe_section("junction")?
        .map(|section| {
            let junction = Junction {
                zero_bias_f: section.quantity(
                    "zero_bias",
                    Dimension::Capacitance,
                    Range::Positive,
                )?,
                potential_v: section.quantity(
                    "potential",
                    Dimension::Voltage,
                    Range::Within(0.05, 10.0),
                )?,
                grading: section.quantity("grading", Dimension::Ratio, Range::Within(0.01, 3.0))?,
            };
            section.finish()?;
            Ok::<_, Problem>(junction)
        })
        .transpose()?;
    let table = section.maybe_text("table")?;
    let curve = match (junction, table) {
        (Some(_), Some(_)) => {
            return Err(section.problem("table", "either junction or table, not both"));
        }
        (Some(junction), None) => Some(DrainCurve::Junction(junction)),
        (None, Some(name)) => Some(DrainCurve::Table(read_table(section, name, files, folder)?)),
        (None, None) => None,
    };
    let farad = match (&curve, section.has("capacitance")) {
        (Some(_), false) => 0.0,
        (Some(_), true) => {
            section.quantity("capacitance", Dimension::Capacitance, Range::NotNegative)?
        }
        (None, _) => section.quantity("capacitance", Dimension::Capacitance, Range::Positive)?,
    };
    let gate_coupling_f = section
        .maybe_quantity("gate_coupling", Dimension::Capacitance, Range::NotNegative)?
        .unwrap_or(0.0);
    section.finish()?;
    Ok(Drain {
        farad,
        curve,
        gate_coupling_f,
    })
}

fn read_table(
    section: &Section<'_>,
    name: &str,
    files: Option<&dyn Files>,
    folder: Option<&str>,
) -> Result<Vec<(f64, f64)>, Problem> {
    let Some(files) = files else {
        return Err(section.problem("table", "no table here: this stage has no folder"));
    };
    let path = match folder {
        Some(folder) if !name.starts_with('/') => format!("{folder}/{name}"),
        _ => name.to_owned(),
    };
    let shown = files.display(&path);
    let text = files.text(&path).map_err(|error| {
        section.problem(
            "table",
            format!("a CSV file that can be read ({shown}: {error})"),
        )
    })?;
    parse_table(&shown, &text)
}

/// Columns `voltage_v,capacitance_f`; lines that begin with # are remarks.
fn parse_table(file: &str, text: &str) -> Result<Vec<(f64, f64)>, Problem> {
    let about = |given: String, allowed: &str| Err(Problem::about_file(file, given, allowed));
    let mut reader = csv::ReaderBuilder::new()
        .comment(Some(b'#'))
        .trim(csv::Trim::All)
        .from_reader(text.as_bytes());
    const HEADER: &str = "a header line voltage_v,capacitance_f";
    match reader.headers() {
        Ok(header) if header.iter().eq(["voltage_v", "capacitance_f"]) => {}
        Ok(header) => return about(header.iter().collect::<Vec<_>>().join(","), HEADER),
        Err(error) => return about(error.to_string(), HEADER),
    }
    let mut points: Vec<(f64, f64)> = Vec::new();
    for record in reader.records() {
        let record = match record {
            Ok(record) => record,
            Err(error) => return about(error.to_string(), "two numbers on each line"),
        };
        let line = record.position().map_or(0, csv::Position::line);
        let number = |index: usize| record.get(index).and_then(|text| text.parse::<f64>().ok());
        let (Some(volt), Some(farad)) = (number(0), number(1)) else {
            let given = format!(
                "line {line}: {}",
                record.iter().collect::<Vec<_>>().join(",")
            );
            return about(given, "two numbers on each line");
        };
        if !(farad > 0.0 && farad.is_finite() && volt.is_finite()) {
            let given = format!("line {line}: {volt} V, {farad} F");
            return about(given, "finite numbers and a capacitance of more than 0 F");
        }
        if let Some(&(before, _)) = points.last()
            && volt <= before
        {
            let given = format!("line {line}: {volt} V after {before} V");
            return about(given, "voltages that rise from line to line");
        }
        points.push((volt, farad));
        if points.len() > MAX_TABLE_POINTS {
            return about(
                format!("more than {MAX_TABLE_POINTS} lines"),
                "at most 2000 points",
            );
        }
    }
    if points.len() < 2 {
        return about(format!("{} points", points.len()), "at least 2 points");
    }
    Ok(points)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_table_is_read_and_its_faults_are_named() {
        let read = |text: &str| parse_table("coss.csv", text);
        let good = "# read off a curve\nvoltage_v,capacitance_f\n0, 9e-11\n5,4e-11\n";
        assert_eq!(read(good).unwrap(), vec![(0.0, 9e-11), (5.0, 4e-11)]);
        for (text, phrase) in [
            ("v,c\n0,1\n", "voltage_v,capacitance_f"),
            ("voltage_v,capacitance_f\n0,1e-12\n0,1e-12\n", "line 3"),
            ("voltage_v,capacitance_f\n0,0\n1,1e-12\n", "more than 0 F"),
            ("voltage_v,capacitance_f\n0,x\n", "two numbers"),
            ("voltage_v,capacitance_f\n0,1e-12\n", "at least 2"),
            ("voltage_v,capacitance_f\n0\n", "line"),
        ] {
            let message = read(text).unwrap_err().to_string();
            assert!(message.contains(phrase), "{message}");
        }
    }
}
