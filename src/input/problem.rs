//! A complaint about a settings file: where, which key, what was given, what is allowed.

use std::fmt;
use std::ops::Range;

/// Something wrong in an input file, with everything needed to mend it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Problem(Box<Complaint>);

/// The parts of a [`Problem`].
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Complaint {
    /// The file, as the user named it.
    pub file: String,
    /// Line and column, from 1, and the text of that line, where the place is known.
    pub place: Option<Place>,
    /// The key with its tables: `load.ladder[2].series.inductance`. Empty for the file as a whole.
    pub key: String,
    /// What stands there.
    pub given: String,
    /// What may stand there.
    pub allowed: String,
    /// What to try, when there is a good guess.
    pub hint: Option<String>,
}

/// A place in a text file.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Place {
    /// From 1.
    pub line: usize,
    /// In characters, from 1.
    pub column: usize,
    /// The whole line.
    pub text: String,
    /// How many characters to mark, at least 1.
    pub width: usize,
}

impl Place {
    /// The place of the byte range `span` in `text`.
    pub fn of(text: &str, span: Range<usize>) -> Self {
        let floor = |mut at: usize| {
            at = at.min(text.len());
            while !text.is_char_boundary(at) {
                at -= 1;
            }
            at
        };
        let start = floor(span.start);
        let end = floor(span.end).max(start);
        let line_start = text[..start].rfind('\n').map_or(0, |at| at + 1);
        let line_end = text[start..].find('\n').map_or(text.len(), |at| start + at);
        Self {
            line: text[..start].matches('\n').count() + 1,
            column: text[line_start..start].chars().count() + 1,
            text: text[line_start..line_end].trim_end_matches('\r').to_owned(),
            width: text[start..end.min(line_end).max(start)]
                .chars()
                .count()
                .max(1),
        }
    }
}

/// Characters of a line that are shown at most.
const MOST_SHOWN: usize = 120;

impl Place {
    /// The line as it can be shown under a message, where its mark starts and how wide it is: of a long
    /// line the stretch around the place, and blanks for what moves a terminal's cursor.
    fn excerpt(&self) -> (String, usize, usize) {
        let at = self.column.saturating_sub(1);
        let skipped = if at > MOST_SHOWN / 2 && self.text.chars().nth(MOST_SHOWN).is_some() {
            at - MOST_SHOWN / 2
        } else {
            0
        };
        let shown: String = self
            .text
            .chars()
            .skip(skipped)
            .take(MOST_SHOWN)
            .map(|c| if c.is_control() { ' ' } else { c })
            .collect();
        let lead = at - skipped;
        let room = shown.chars().count().saturating_sub(lead).max(1);
        (shown, lead, self.width.clamp(1, room))
    }
}

impl Problem {
    /// A complaint about a file as a whole.
    pub fn about_file(
        file: impl Into<String>,
        given: impl Into<String>,
        allowed: impl Into<String>,
    ) -> Self {
        Self::from(Complaint {
            file: file.into(),
            place: None,
            key: String::new(),
            given: given.into(),
            allowed: allowed.into(),
            hint: None,
        })
    }

    /// A file that could not be opened or read; `wanted` is what it should be: "a stage file".
    pub fn unreadable(file: &str, error: &std::io::Error, wanted: &str) -> Self {
        let given = format!("a file that cannot be read ({error})");
        Self::about_file(file, given, wanted)
    }

    /// Its parts.
    pub fn parts(&self) -> &Complaint {
        &self.0
    }

    /// The same complaint with something to try.
    #[must_use]
    pub fn with_hint(mut self, hint: impl Into<String>) -> Self {
        self.0.hint = Some(hint.into());
        self
    }
}

/// `file:line:column: key: given ..., allowed: ...`, then the line with a mark under the place.
impl fmt::Display for Problem {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Complaint {
            file,
            place,
            key,
            given,
            allowed,
            hint,
        } = &*self.0;
        f.write_str(file)?;
        if let Some(place) = place {
            write!(f, ":{}:{}", place.line, place.column)?;
        }
        if !key.is_empty() {
            write!(f, ": {key}")?;
        }
        write!(f, ": given {given}; allowed: {allowed}")?;
        if let Some(place) = place {
            let (shown, lead, width) = place.excerpt();
            let number = place.line.to_string();
            write!(f, "\n  {number} | {shown}")?;
            let margin = " ".repeat(number.len());
            let (lead, marks) = (" ".repeat(lead), "^".repeat(width));
            write!(f, "\n  {margin} | {lead}{marks}")?;
        }
        if let Some(hint) = hint {
            write!(f, "\n  {hint}")?;
        }
        Ok(())
    }
}

impl std::error::Error for Problem {}

impl From<Complaint> for Problem {
    fn from(complaint: Complaint) -> Self {
        Self(Box::new(complaint))
    }
}
