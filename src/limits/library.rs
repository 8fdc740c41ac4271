//! All sets that can be named: the published ones, and the user's files.

use super::read::{read_sets, read_sets_beside};
use super::set::LimitSet;
use crate::input::{Problem, nearest};

const PUBLISHED: &str = include_str!("published.toml");

/// Sets by name.
#[derive(Debug, Clone, PartialEq)]
pub struct Library {
    sets: Vec<LimitSet>,
}

/// No set has that name.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("no limit set is called \"{name}\"; allowed: the names that `quietedge limits` lists{}", .nearest.as_ref().map(|near| format!("; did you mean \"{near}\"?")).unwrap_or_default())]
pub struct UnknownSet {
    /// As given.
    pub name: String,
    /// The most similar name.
    pub nearest: Option<String>,
}

impl Library {
    /// The published sets that are compiled in.
    ///
    /// # Errors
    /// None as delivered; a test reads the compiled-in file.
    pub fn published() -> Result<Self, Problem> {
        Ok(Self {
            sets: read_sets("published limits", PUBLISHED)?,
        })
    }

    /// Adds the sets of a user's file and returns their names. A set may not take a name that is
    /// there already.
    ///
    /// # Errors
    /// As [`read_sets`], and a name that is taken.
    pub fn add(&mut self, file: &str, text: &str) -> Result<Vec<String>, Problem> {
        let taken = |name: &str| self.sets.iter().any(|set| set.name == name);
        let sets = read_sets_beside(file, text, taken)?;
        let names = sets.iter().map(|set| set.name.clone()).collect();
        self.sets.extend(sets);
        Ok(names)
    }

    /// All sets, published ones first.
    pub fn sets(&self) -> &[LimitSet] {
        &self.sets
    }

    /// The set called `name`.
    ///
    /// # Errors
    /// [`UnknownSet`] with the most similar name.
    pub fn find(&self, name: &str) -> Result<&LimitSet, UnknownSet> {
        self.sets
            .iter()
            .find(|set| set.name == name)
            .ok_or_else(|| {
                let names: Vec<&str> = self.sets.iter().map(|set| set.name.as_str()).collect();
                UnknownSet {
                    name: name.to_owned(),
                    nearest: nearest(name, &names).map(str::to_owned),
                }
            })
    }
}
