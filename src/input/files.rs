//! Where files come from: the file system, or bytes compiled into the program.

use std::io::{self, Read, Seek};

/// Anything that can be read from any position.
pub trait ReadSeek: Read + Seek + Send {}

impl<T: Read + Seek + Send> ReadSeek for T {}

/// Opens the files that a study names. Names are relative to the study that holds them.
///
/// Steps never open paths themselves: the command line hands them the file system, the built-in
/// studies hand them bytes in memory.
pub trait Files: Sync {
    /// Opens `name` for reading.
    ///
    /// # Errors
    /// As the file system, or `NotFound` for an unknown built-in name.
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>>;

    /// How to show `name` in messages.
    fn display(&self, name: &str) -> String {
        name.to_owned()
    }

    /// Reads `name` whole, as text of at most `MAX_TEXT_BYTES`.
    ///
    /// # Errors
    /// As [`Files::open`]; text that is not UTF-8 or too long.
    fn text(&self, name: &str) -> io::Result<String> {
        read_text(self.open(name)?)
    }
}

/// Reads `reader` to its end, as text of at most `MAX_TEXT_BYTES`; a byte order mark is left out.
///
/// # Errors
/// As the reader; text that is not UTF-8 or too long.
pub fn read_text(reader: impl Read) -> io::Result<String> {
    let invalid = |text: String| io::Error::new(io::ErrorKind::InvalidData, text);
    let mut bytes = Vec::new();
    reader.take(MAX_TEXT_BYTES + 1).read_to_end(&mut bytes)?;
    if bytes.len() as u64 > MAX_TEXT_BYTES {
        return Err(invalid(format!(
            "longer than {MAX_TEXT_BYTES} bytes, which no settings file or map needs"
        )));
    }
    if bytes.starts_with(&[0xff, 0xfe]) || bytes.starts_with(&[0xfe, 0xff]) {
        return Err(invalid("UTF-16 text: save it as UTF-8".to_owned()));
    }
    let text = String::from_utf8(bytes).map_err(|error| {
        let at = error.utf8_error().valid_up_to();
        let line = error.as_bytes()[..at]
            .iter()
            .filter(|byte| **byte == b'\n')
            .count()
            + 1;
        invalid(format!("line {line} is not UTF-8 text"))
    })?;
    Ok(text
        .strip_prefix('\u{feff}')
        .map(str::to_owned)
        .unwrap_or(text))
}

/// The longest settings file that is read, bytes.
pub const MAX_TEXT_BYTES: u64 = 16 << 20;
