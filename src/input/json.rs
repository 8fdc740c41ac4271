//! JSON documents, with complaints that point at a place.

use super::problem::{Complaint, Place, Problem};

/// The document in `text`, which came from `file`; `allowed` says what should stand there.
///
/// # Errors
/// What the text is instead, with its line and column.
pub fn parse_json<T: serde::de::DeserializeOwned>(
    file: &str,
    text: &str,
    allowed: &str,
) -> Result<T, Problem> {
    serde_json::from_str(text).map_err(|error| {
        let line = text
            .lines()
            .nth(error.line().saturating_sub(1))
            .unwrap_or_default();
        Problem::from(Complaint {
            file: file.to_owned(),
            place: Some(Place {
                line: error.line(),
                column: error.column().max(1),
                text: line.chars().take(200).collect(),
                width: 1,
            }),
            key: String::new(),
            given: without_position(&error),
            allowed: allowed.to_owned(),
            hint: None,
        })
    })
}

/// The words of `error`; its line and column stand in the place already.
fn without_position(error: &serde_json::Error) -> String {
    let text = error.to_string();
    match text.rfind(" at line ") {
        Some(at) => text[..at].to_owned(),
        None => text,
    }
}
