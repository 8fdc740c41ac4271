//! A file of limit sets: the published ones and the user's own have one form.

use super::consistent::hold;
use super::read_mask::mask;
use super::read_rows::{adjacent, modulation, signal, spurious};
use super::set::{CheckPoint, Confidence, Kind, LimitSet, Obtained, Provenance};
use crate::input::{Document, Problem, Range, Section};
use crate::units::Dimension;

/// The version of the form, key `schema`.
const SCHEMA: u64 = 1;

#[derive(Clone, Copy)]
enum Word {
    Mask,
    Adjacent,
    Modulation,
    Spurious,
    Signal,
}

/// Reads every set of the TOML `text` that came from `file`. Sets that do not say how they were
/// obtained count as the user's own.
///
/// # Errors
/// The first thing that is wrong, with its place.
pub fn read_sets(file: &str, text: &str) -> Result<Vec<LimitSet>, Problem> {
    read_sets_beside(file, text, |_| false)
}

/// As [`read_sets`], for a file whose sets may not take the names that are `taken`.
pub(super) fn read_sets_beside(
    file: &str,
    text: &str,
    taken: impl Fn(&str) -> bool,
) -> Result<Vec<LimitSet>, Problem> {
    let document = Document::parse(file, text)?;
    let root = document.root();
    root.maybe_whole("schema", SCHEMA, SCHEMA)?;
    let sets = root.section("set")?;
    root.finish()?;
    let named = sets.named_sections()?;
    if named.is_empty() {
        return Err(sets.problem_here("no set", "at least one table [set.NAME]"));
    }
    named
        .into_iter()
        .map(|(name, section)| {
            if taken(name) {
                return Err(section.problem_here(
                    format!("a set called \"{name}\""),
                    "a name that no other set has",
                ));
            }
            set(name, &section)
        })
        .collect()
}

fn set(name: &str, section: &Section<'_>) -> Result<LimitSet, Problem> {
    let kinds = [
        ("mask", Word::Mask),
        ("adjacent", Word::Adjacent),
        ("modulation", Word::Modulation),
        ("spurious", Word::Spurious),
        ("signal", Word::Signal),
    ];
    let title = section.maybe_text("title")?.unwrap_or(name).to_owned();
    let Some(word) = section.maybe_choice("kind", &kinds)? else {
        return Err(section.problem(
            "kind",
            "\"mask\", \"adjacent\", \"modulation\", \"spurious\" or \"signal\"",
        ));
    };
    let provenance = provenance(section)?;
    let kind = match word {
        Word::Mask => Kind::Mask(mask(section)?),
        Word::Adjacent => Kind::Adjacent(adjacent(section)?),
        Word::Modulation => Kind::Modulation(modulation(section)?),
        Word::Spurious => Kind::Spurious(spurious(section)?),
        Word::Signal => Kind::Signal(signal(section)?),
    };
    let checks = match &kind {
        Kind::Mask(mask) => section
            .sections("check")?
            .iter()
            .map(|row| {
                let check = check_point(row)?;
                hold(mask, &check, row)?;
                Ok(check)
            })
            .collect::<Result<_, Problem>>()?,
        _ => Vec::new(),
    };
    section.finish()?;
    Ok(LimitSet {
        name: name.to_owned(),
        title,
        provenance,
        kind,
        checks,
    })
}

fn provenance(section: &Section<'_>) -> Result<Provenance, Problem> {
    let text = |key| Ok::<_, Problem>(section.maybe_text(key)?.unwrap_or_default().to_owned());
    let owned = |texts: Vec<&str>| texts.into_iter().map(str::to_owned).collect();
    Ok(Provenance {
        source: text("source")?,
        clause: text("clause")?,
        edition: text("edition")?,
        obtained: section
            .maybe_choice(
                "obtained",
                &[
                    ("read", Obtained::Read),
                    ("second-hand", Obtained::SecondHand),
                    ("memory", Obtained::Memory),
                    ("own", Obtained::Own),
                ],
            )?
            .unwrap_or(Obtained::Own),
        source_kind: section.maybe_text("source_kind")?.map(str::to_owned),
        confidence: section.maybe_choice(
            "confidence",
            &[
                ("high", Confidence::High),
                ("medium", Confidence::Medium),
                ("low", Confidence::Low),
            ],
        )?,
        memory_parts: owned(section.texts("memory_parts")?),
        cross_checked: section.maybe_text("cross_checked")?.map(str::to_owned),
        notes: owned(section.texts("notes")?),
    })
}

fn check_point(row: &Section<'_>) -> Result<CheckPoint, Problem> {
    let point = CheckPoint {
        offset_hz: row.quantity("offset_hz", Dimension::Frequency, Range::NotNegative)?,
        power_w: row.maybe_quantity("power_w", Dimension::Power, Range::Positive)?,
        authorized_bandwidth_hz: row.maybe_quantity(
            "authorized_bandwidth_hz",
            Dimension::Frequency,
            Range::Positive,
        )?,
        limit_db: row.quantity("limit_db", Dimension::Decibel, Range::Any)?,
    };
    row.finish()?;
    Ok(point)
}
