//! TOML tables read key by key, remembering which keys are known.

use std::cell::RefCell;
use std::fmt;
use std::ops::Range as Span;

use super::document::{Document, Entry, Node, Value};
use super::problem::{Complaint, Place, Problem};

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
    pub(super) fn new(
        document: &'a Document,
        entries: &'a [Entry],
        path: String,
        span: Span<usize>,
    ) -> Self {
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

    pub(super) fn find(&self, key: &'static str) -> Option<&'a Node> {
        let mut known = self.known.borrow_mut();
        if !known.contains(&key) {
            known.push(key);
        }
        self.entries
            .iter()
            .find(|entry| entry.key == key)
            .map(|entry| &entry.node)
    }

    pub(super) fn key_path(&self, key: &str) -> String {
        if self.path.is_empty() {
            key.to_owned()
        } else {
            format!("{}.{key}", self.path)
        }
    }

    pub(super) fn complain(
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

    pub(super) fn missing(&self, key: &'static str, allowed: impl Into<String>) -> Problem {
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
    pub(super) fn source_of(&self, node: &Node) -> String {
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
