//! The file system, as steps see it.

use std::fs::File;
use std::io;
use std::path::{Path, PathBuf};

use crate::input::{Files, ReadSeek};

/// Files on disk; relative names are relative to one folder.
#[derive(Debug)]
pub struct Disk {
    folder: PathBuf,
}

impl Disk {
    /// Files relative to the folder that holds `file`.
    pub fn beside(file: &Path) -> Self {
        Self {
            folder: file.parent().unwrap_or_else(|| Path::new("")).to_owned(),
        }
    }

    /// Files relative to the working folder.
    pub fn here() -> Self {
        Self {
            folder: PathBuf::new(),
        }
    }
}

impl Files for Disk {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        let file = File::open(self.folder.join(name))?;
        if file.metadata()?.is_dir() {
            return Err(io::Error::new(
                io::ErrorKind::IsADirectory,
                "it is a folder, not a file",
            ));
        }
        Ok(Box::new(file))
    }

    fn display(&self, name: &str) -> String {
        self.folder.join(name).display().to_string()
    }
}
