//! A settings file, parsed: TOML values with their places.

use std::ops::Range as Span;

use toml::de::{DeTable, DeValue};

use super::problem::{Complaint, Place, Problem};
use super::section::Section;

/// A settings file, parsed.
#[derive(Debug)]
pub struct Document {
    pub(super) file: String,
    pub(super) text: String,
    root: Vec<Entry>,
}

#[derive(Debug)]
pub(super) struct Entry {
    pub(super) key: String,
    pub(super) key_span: Span<usize>,
    pub(super) node: Node,
}

#[derive(Debug)]
pub(super) struct Node {
    pub(super) span: Span<usize>,
    pub(super) value: Value,
}

#[derive(Debug)]
pub(super) enum Value {
    Text(String),
    Number(f64),
    Whole(i64),
    Flag(bool),
    List(Vec<Node>),
    Table(Vec<Entry>),
    Other,
}

impl Document {
    /// Parses TOML `text` that came from `file`.
    ///
    /// # Errors
    /// A syntax error, with its place.
    pub fn parse(file: &str, text: &str) -> Result<Self, Problem> {
        let root = DeTable::parse(text).map_err(|error| {
            Problem::from(Complaint {
                file: file.to_owned(),
                place: error.span().map(|span| Place::of(text, span)),
                key: String::new(),
                given: "text that is no TOML".to_owned(),
                allowed: format!("TOML ({})", error.message().trim().replace('\n', ", ")),
                hint: None,
            })
        })?;
        Ok(Self {
            file: file.to_owned(),
            text: text.to_owned(),
            root: entries(root.get_ref()),
        })
    }

    /// The file's top table.
    pub fn root(&self) -> Section<'_> {
        Section::new(self, &self.root, String::new(), 0..0)
    }
}

fn entries(table: &DeTable<'_>) -> Vec<Entry> {
    table
        .iter()
        .map(|(key, value)| Entry {
            key: key.get_ref().to_string(),
            key_span: key.span(),
            node: Node {
                span: value.span(),
                value: convert(value.get_ref()),
            },
        })
        .collect()
}

fn convert(value: &DeValue<'_>) -> Value {
    match value {
        DeValue::String(text) => Value::Text(text.to_string()),
        DeValue::Integer(number) => {
            i64::from_str_radix(number.as_str(), number.radix()).map_or(Value::Other, Value::Whole)
        }
        DeValue::Float(number) => number.as_str().parse().map_or(Value::Other, Value::Number),
        DeValue::Boolean(flag) => Value::Flag(*flag),
        DeValue::Datetime(_) => Value::Other,
        DeValue::Array(list) => Value::List(
            list.iter()
                .map(|item| Node {
                    span: item.span(),
                    value: convert(item.get_ref()),
                })
                .collect(),
        ),
        DeValue::Table(table) => Value::Table(entries(table)),
    }
}
