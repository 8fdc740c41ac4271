//! TOML tables read key by key, remembering which keys are known.

use std::cell::RefCell;
use std::fmt;
use std::ops::Range as Span;

use toml::de::{DeTable, DeValue};

use super::problem::{Complaint, Place, Problem};
use crate::units::{self, Dimension};

/// A settings file, parsed.
#[derive(Debug)]
pub struct Document {
    file: String,
    text: String,
    root: Vec<Entry>,
}

#[derive(Debug)]
struct Entry {
    key: String,
    key_span: Span<usize>,
    node: Node,
}

#[derive(Debug)]
struct Node {
    span: Span<usize>,
    value: Value,
}

#[derive(Debug)]
enum Value {
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

/// Which numbers are allowed.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Range {
    /// Any finite number.
    Any,
    /// Greater than zero.
    Positive,
    /// Zero or greater.
    NotNegative,
    /// From the first to the second, both included.
    Within(f64, f64),
    /// Between the first and the second, neither included.
    Between(f64, f64),
    /// Greater than the first, up to and including the second.
    UpTo(f64, f64),
}

impl Range {
    /// True where `value` is allowed.
    pub fn holds(self, value: f64) -> bool {
        value.is_finite()
            && match self {
                Self::Any => true,
                Self::Positive => value > 0.0,
                Self::NotNegative => value >= 0.0,
                Self::Within(low, high) => (low..=high).contains(&value),
                Self::Between(low, high) => low < value && value < high,
                Self::UpTo(low, high) => low < value && value <= high,
            }
    }

    fn describe(self, dimension: Dimension) -> String {
        let unit = dimension.unit();
        let show = |value: f64| units::show(value, unit, 6);
        let limits = match self {
            Self::Any => String::new(),
            Self::Positive => format!(", greater than {}", show(0.0)),
            Self::NotNegative => format!(", {} or more", show(0.0)),
            Self::Within(low, high) => format!(", {} to {}", show(low), show(high)),
            Self::Between(low, high) => {
                format!(", more than {} and less than {}", show(low), show(high))
            }
            Self::UpTo(low, high) => {
                format!(", more than {} and at most {}", show(low), show(high))
            }
        };
        format!(
            "{}{limits}, such as {}",
            dimension.name(),
            dimension.example()
        )
    }
}

/// One table of a settings file. Every key asked for is known; [`Section::finish`] refuses the rest.
#[derive(Debug)]
pub struct Section<'a> {
    document: &'a Document,
    entries: &'a [Entry],
    path: String,
    span: Span<usize>,
    known: RefCell<Vec<&'static str>>,
}

impl<'a> Section<'a> {
    fn new(document: &'a Document, entries: &'a [Entry], path: String, span: Span<usize>) -> Self {
        Self {
            document,
            entries,
            path,
            span,
            known: RefCell::default(),
        }
    }

    /// The table's own name with the tables above it; empty for the top.
    pub fn path(&self) -> &str {
        &self.path
    }

    /// The file the table stands in, as the user named it.
    pub fn file(&self) -> &str {
        &self.document.file
    }

    /// All keys that stand in the table, in the file's order.
    pub fn keys(&self) -> impl Iterator<Item = &'a str> {
        self.entries.iter().map(|entry| entry.key.as_str())
    }

    /// True where `key` stands in the table. The key counts as known.
    pub fn has(&self, key: &'static str) -> bool {
        self.find(key).is_some()
    }

    fn find(&self, key: &'static str) -> Option<&'a Node> {
        let mut known = self.known.borrow_mut();
        if !known.contains(&key) {
            known.push(key);
        }
        self.entries
            .iter()
            .find(|entry| entry.key == key)
            .map(|entry| &entry.node)
    }

    fn key_path(&self, key: &str) -> String {
        if self.path.is_empty() {
            key.to_owned()
        } else {
            format!("{}.{key}", self.path)
        }
    }

    fn complain(
        &self,
        span: Option<Span<usize>>,
        key: String,
        given: String,
        allowed: String,
    ) -> Problem {
        Problem::from(Complaint {
            file: self.document.file.clone(),
            place: span.map(|span| Place::of(&self.document.text, span)),
            key: shortened(key),
            given,
            allowed,
            hint: None,
        })
    }

    /// A complaint that points at the value of `key`, or at the table where the key is absent.
    /// `given` is read from the file.
    pub fn problem(&self, key: &'static str, allowed: impl Into<String>) -> Problem {
        match self.find(key) {
            Some(node) => self.complain(
                Some(node.span.clone()),
                self.key_path(key),
                self.source_of(node),
                allowed.into(),
            ),
            None => self.missing(key, allowed),
        }
    }

    /// A complaint about the table as a whole.
    pub fn problem_here(&self, given: impl Into<String>, allowed: impl Into<String>) -> Problem {
        let span = (self.span != (0..0)).then(|| self.span.clone());
        self.complain(span, self.path.clone(), given.into(), allowed.into())
    }

    fn missing(&self, key: &'static str, allowed: impl Into<String>) -> Problem {
        // A key that was probably meant to be this one is where the mending has to happen.
        let misspelt = self
            .entries
            .iter()
            .filter(|entry| !self.known.borrow().contains(&entry.key.as_str()))
            .find(|entry| nearest(&entry.key, &[key]).is_some());
        let table = (self.span != (0..0)).then(|| self.span.clone());
        let span = misspelt.map(|entry| entry.key_span.clone()).or(table);
        let problem = self.complain(
            span,
            self.key_path(key),
            "nothing".to_owned(),
            allowed.into(),
        );
        match misspelt {
            Some(entry) => problem.with_hint(format!(
                "there is an unknown key \"{}\": did you mean \"{key}\"?",
                shortened(entry.key.clone())
            )),
            None => problem,
        }
    }

    /// The text of the file at `node`, cut to one line of a bearable length.
    fn source_of(&self, node: &Node) -> String {
        if let Value::Table(_) = node.value {
            return "a table".to_owned();
        }
        let text = self
            .document
            .text
            .get(node.span.clone())
            .unwrap_or_default();
        let line = text.lines().next().unwrap_or_default();
        if line.chars().count() > 60 || line.len() < text.len() {
            format!("{} ...", line.chars().take(60).collect::<String>())
        } else {
            line.to_owned()
        }
    }

    fn number(
        &self,
        node: &Node,
        key: String,
        dimension: Dimension,
        range: Range,
    ) -> Result<f64, Problem> {
        let complain = || {
            self.complain(
                Some(node.span.clone()),
                key.clone(),
                self.source_of(node),
                range.describe(dimension),
            )
        };
        let value = match &node.value {
            Value::Number(number) => *number,
            Value::Whole(number) => *number as f64,
            Value::Text(text) => units::parse(text, dimension)
                .map_err(|error| complain().with_hint(error.to_string()))?,
            _ => return Err(complain()),
        };
        if !range.holds(value) {
            return Err(complain());
        }
        if !dimension.is_plausible(value) {
            return Err(self.complain(
                Some(node.span.clone()),
                key,
                self.source_of(node),
                format!(
                    "{}, such as {}",
                    dimension.plausible_text(),
                    dimension.example()
                ),
            ));
        }
        Ok(value)
    }

    /// The quantity at `key` in SI, where it is given.
    ///
    /// # Errors
    /// A value that is no quantity of this dimension, or out of range.
    pub fn maybe_quantity(
        &self,
        key: &'static str,
        dimension: Dimension,
        range: Range,
    ) -> Result<Option<f64>, Problem> {
        self.find(key)
            .map(|node| self.number(node, self.key_path(key), dimension, range))
            .transpose()
    }

    /// The quantity at `key` in SI.
    ///
    /// # Errors
    /// As [`Section::maybe_quantity`], and a missing key.
    pub fn quantity(
        &self,
        key: &'static str,
        dimension: Dimension,
        range: Range,
    ) -> Result<f64, Problem> {
        self.maybe_quantity(key, dimension, range)?
            .ok_or_else(|| self.missing(key, range.describe(dimension)))
    }

    /// A list of quantities in SI; empty where the key is absent. A single quantity counts as a list of one.
    ///
    /// # Errors
    /// As [`Section::maybe_quantity`], for any item.
    pub fn quantities(
        &self,
        key: &'static str,
        dimension: Dimension,
        range: Range,
    ) -> Result<Vec<f64>, Problem> {
        match self.find(key) {
            None => Ok(Vec::new()),
            Some(Node {
                value: Value::List(items),
                ..
            }) => items
                .iter()
                .enumerate()
                .map(|(at, item)| {
                    self.number(
                        item,
                        format!("{}[{}]", self.key_path(key), at + 1),
                        dimension,
                        range,
                    )
                })
                .collect(),
            Some(node) => Ok(vec![self.number(
                node,
                self.key_path(key),
                dimension,
                range,
            )?]),
        }
    }

    /// The whole number at `key`, where it is given.
    ///
    /// # Errors
    /// Anything else than a whole number from `low` to `high`.
    pub fn maybe_whole(
        &self,
        key: &'static str,
        low: u64,
        high: u64,
    ) -> Result<Option<u64>, Problem> {
        match self.find(key) {
            None => Ok(None),
            Some(Node {
                value: Value::Whole(number),
                ..
            }) if u64::try_from(*number).is_ok_and(|number| (low..=high).contains(&number)) => {
                Ok(Some(*number as u64))
            }
            Some(_) => Err(self.problem(key, format!("a whole number, {low} to {high}"))),
        }
    }

    /// The text at `key`, where it is given.
    ///
    /// # Errors
    /// Anything else than a text.
    pub fn maybe_text(&self, key: &'static str) -> Result<Option<&'a str>, Problem> {
        match self.find(key) {
            None => Ok(None),
            Some(Node {
                value: Value::Text(text),
                ..
            }) => Ok(Some(text)),
            Some(_) => Err(self.problem(key, "a text in quotes")),
        }
    }

    /// The text at `key`.
    ///
    /// # Errors
    /// As [`Section::maybe_text`], and a missing key.
    pub fn text(&self, key: &'static str) -> Result<&'a str, Problem> {
        self.maybe_text(key)?
            .ok_or_else(|| self.missing(key, "a text in quotes"))
    }

    /// A list of texts; empty where the key is absent.
    ///
    /// # Errors
    /// Anything else than a list of texts.
    pub fn texts(&self, key: &'static str) -> Result<Vec<&'a str>, Problem> {
        let wrong = || self.problem(key, "a list of texts in quotes");
        match self.find(key) {
            None => Ok(Vec::new()),
            Some(Node {
                value: Value::List(items),
                ..
            }) => items
                .iter()
                .map(|item| match &item.value {
                    Value::Text(text) => Ok(text.as_str()),
                    _ => Err(wrong()),
                })
                .collect(),
            Some(_) => Err(wrong()),
        }
    }

    /// Rows of pure numbers, each of `width` numbers: `[[0, 1], [2, 3]]`; empty where the key is absent.
    ///
    /// # Errors
    /// Anything else.
    pub fn rows(&self, key: &'static str, width: usize) -> Result<Vec<Vec<f64>>, Problem> {
        let wrong = || self.problem(key, format!("a list of rows of {width} numbers"));
        let number = |node: &Node| match node.value {
            Value::Number(number) if number.is_finite() => Some(number),
            Value::Whole(number) => Some(number as f64),
            _ => None,
        };
        match self.find(key) {
            None => Ok(Vec::new()),
            Some(Node {
                value: Value::List(rows),
                ..
            }) => rows
                .iter()
                .map(|row| match &row.value {
                    Value::List(items) if items.len() == width => items
                        .iter()
                        .map(|item| number(item).ok_or_else(wrong))
                        .collect(),
                    _ => Err(wrong()),
                })
                .collect(),
            Some(_) => Err(wrong()),
        }
    }

    /// True or false at `key`, where it is given.
    ///
    /// # Errors
    /// Anything else than `true` or `false`.
    pub fn maybe_flag(&self, key: &'static str) -> Result<Option<bool>, Problem> {
        match self.find(key) {
            None => Ok(None),
            Some(Node {
                value: Value::Flag(flag),
                ..
            }) => Ok(Some(*flag)),
            Some(_) => Err(self.problem(key, "true or false")),
        }
    }

    /// One of a few words at `key`, where it is given.
    ///
    /// # Errors
    /// Any other word, with a suggestion.
    pub fn maybe_choice<T: Copy>(
        &self,
        key: &'static str,
        choices: &[(&str, T)],
    ) -> Result<Option<T>, Problem> {
        let Some(word) = self.maybe_text(key)? else {
            return Ok(None);
        };
        if let Some((_, value)) = choices.iter().find(|(name, _)| *name == word) {
            return Ok(Some(*value));
        }
        let names: Vec<&str> = choices.iter().map(|(name, _)| *name).collect();
        let quoted: Vec<String> = names.iter().map(|name| format!("\"{name}\"")).collect();
        let problem = self.problem(key, quoted.join(", "));
        Err(match nearest(word, &names) {
            Some(name) => problem.with_hint(format!("did you mean \"{name}\"?")),
            None => problem,
        })
    }

    /// The table at `key`, where it is given.
    ///
    /// # Errors
    /// Anything else than a table.
    pub fn maybe_section(&self, key: &'static str) -> Result<Option<Section<'a>>, Problem> {
        match self.find(key) {
            None => Ok(None),
            Some(Node {
                value: Value::Table(entries),
                span,
            }) => Ok(Some(Section::new(
                self.document,
                entries,
                self.key_path(key),
                span.clone(),
            ))),
            Some(_) => Err(self.problem(key, "a table")),
        }
    }

    /// The table at `key`.
    ///
    /// # Errors
    /// As [`Section::maybe_section`], and a missing table.
    pub fn section(&self, key: &'static str) -> Result<Section<'a>, Problem> {
        self.maybe_section(key)?
            .ok_or_else(|| self.missing(key, format!("a table [{}]", self.key_path(key))))
    }

    /// The list of tables at `key`; empty where the key is absent. A single table counts as a list of one.
    ///
    /// # Errors
    /// Anything else than tables.
    pub fn sections(&self, key: &'static str) -> Result<Vec<Section<'a>>, Problem> {
        let path = self.key_path(key);
        let wrong = || self.problem(key, format!("tables [[{path}]]"));
        match self.find(key) {
            None => Ok(Vec::new()),
            Some(Node {
                value: Value::List(items),
                ..
            }) => items
                .iter()
                .enumerate()
                .map(|(at, item)| match &item.value {
                    Value::Table(entries) => Ok(Section::new(
                        self.document,
                        entries,
                        format!("{path}[{}]", at + 1),
                        item.span.clone(),
                    )),
                    _ => Err(wrong()),
                })
                .collect(),
            Some(Node {
                value: Value::Table(entries),
                span,
            }) => Ok(vec![Section::new(
                self.document,
                entries,
                path,
                span.clone(),
            )]),
            Some(_) => Err(wrong()),
        }
    }

    /// Every table in this one, with its name: for files whose tables are named by the user.
    ///
    /// # Errors
    /// A key that holds no table.
    pub fn named_sections(&self) -> Result<Vec<(&'a str, Section<'a>)>, Problem> {
        self.entries
            .iter()
            .map(|entry| match &entry.node.value {
                Value::Table(entries) => Ok((
                    entry.key.as_str(),
                    Section::new(
                        self.document,
                        entries,
                        self.key_path(&entry.key),
                        entry.key_span.clone(),
                    ),
                )),
                _ => Err(self.complain(
                    Some(entry.node.span.clone()),
                    self.key_path(&entry.key),
                    self.source_of(&entry.node),
                    "a table".to_owned(),
                )),
            })
            .collect()
    }

    /// Refuses keys that were never asked for, with the nearest known one as a suggestion.
    ///
    /// # Errors
    /// The first unknown key.
    pub fn finish(&self) -> Result<(), Problem> {
        let known = self.known.borrow();
        let Some(entry) = self
            .entries
            .iter()
            .find(|entry| !known.contains(&entry.key.as_str()))
        else {
            return Ok(());
        };
        let problem = self.complain(
            Some(entry.key_span.clone()),
            self.key_path(&entry.key),
            "an unknown key".to_owned(),
            known.join(", "),
        );
        Err(match nearest(&entry.key, &known) {
            Some(name) => problem.with_hint(format!("did you mean \"{name}\"?")),
            None => problem,
        })
    }
}

/// `key`, cut where nobody could read on.
fn shortened(key: String) -> String {
    const MOST: usize = 160;
    match key.char_indices().nth(MOST) {
        Some((end, _)) => format!("{} ...", &key[..end]),
        None => key,
    }
}

/// The word of `words` that `word` was probably meant to be.
pub fn nearest<'a>(word: &str, words: &[&'a str]) -> Option<&'a str> {
    words
        .iter()
        .map(|name| {
            (
                strsim::jaro_winkler(&word.to_lowercase(), &name.to_lowercase()),
                *name,
            )
        })
        .filter(|(score, _)| *score > 0.8)
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .map(|(_, name)| name)
}

impl fmt::Display for Section<'_> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(if self.path.is_empty() {
            "the file"
        } else {
            &self.path
        })
    }
}
