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
        let mut text = String::new();
        self.open(name)?
            .take(MAX_TEXT_BYTES + 1)
            .read_to_string(&mut text)?;
        if text.len() as u64 > MAX_TEXT_BYTES {
            return Err(io::Error::new(
                io::ErrorKind::InvalidData,
                format!("longer than {MAX_TEXT_BYTES} bytes, which no settings file needs"),
            ));
        }
        Ok(text)
    }
}

/// The longest settings file that is read, bytes.
pub const MAX_TEXT_BYTES: u64 = 16 << 20;
