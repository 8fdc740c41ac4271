//! The values of a table: quantities, words, flags and lists.

use super::document::{Node, Value};
use super::problem::Problem;
use super::range::Range;
use super::section::{Section, nearest};
use crate::units::{self, Dimension};

impl<'a> Section<'a> {
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
}
