//! Terms in a file.

use super::mask::Corner;
use super::terms::{Reference, Term};
use crate::input::{Problem, Range, Section};
use crate::units::Dimension;

const HERTZ: Dimension = Dimension::Frequency;

#[derive(Clone, Copy)]
enum Form {
    Const,
    Linear,
    Log,
    Power,
    Absolute,
}

/// One term. `from` is where its segment starts: a logarithm has no value at 0.
pub(super) fn term(
    section: &Section<'_>,
    from: Corner,
    reference: Reference,
) -> Result<Term, Problem> {
    let forms = [
        ("const", Form::Const),
        ("linear", Form::Linear),
        ("log", Form::Log),
        ("power", Form::Power),
        ("absolute", Form::Absolute),
    ];
    let Some(form) = section.maybe_choice("form", &forms)? else {
        return Err(section.problem(
            "form",
            "\"const\", \"linear\", \"log\", \"power\" or \"absolute\"",
        ));
    };
    let decibel = |key| section.quantity(key, Dimension::Decibel, Range::Any);
    if reference == Reference::AbsoluteDbm && !matches!(form, Form::Absolute) {
        return Err(section.problem(
            "form",
            "\"absolute\" where the set's reference is \"absolute_dbm\"",
        ));
    }
    let term = match form {
        Form::Const => Term::Const { db: decibel("db")? },
        Form::Linear => Term::Linear {
            at_hz: section.quantity("at_hz", HERTZ, Range::NotNegative)?,
            at_db: decibel("at_db")?,
            slope_db_per_hz: section.quantity("slope_db_per_hz", Dimension::Ratio, Range::Any)?,
        },
        Form::Log => {
            if matches!(from, Corner::Hz(at) | Corner::Fraction(at) if at <= 0.0) {
                return Err(section.problem(
                    "form",
                    "another form where the segment starts at 0: a logarithm has no value there",
                ));
            }
            Term::Log {
                k_db: decibel("k_db")?,
                f0_hz: section.quantity("f0_hz", HERTZ, Range::Positive)?,
            }
        }
        Form::Power => Term::Power {
            c_db: decibel("c_db")?,
        },
        Form::Absolute => Term::Absolute {
            dbm: section.quantity("dbm", Dimension::Level, Range::Any)?,
        },
    };
    section.finish()?;
    Ok(term)
}
