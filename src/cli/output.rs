//! Files that a command writes: whole or not at all, and never over others unasked.

use std::fs::File;
use std::io::Write;
use std::path::{Path, PathBuf};

use tempfile::NamedTempFile;

use super::Failure;

/// Where a command writes its files.
#[derive(Debug, Clone, clap::Args)]
#[command(next_help_heading = "Files")]
pub struct OutputOptions {
    /// Folder for the files the command writes; made where it is missing
    #[arg(long, value_name = "DIR")]
    pub out: Option<PathBuf>,

    /// Overwrite files that are there already
    #[arg(long)]
    pub force: bool,
}

/// A folder whose files are claimed before the long work starts and written whole at its end.
#[derive(Debug)]
pub struct OutputFolder {
    folder: PathBuf,
    force: bool,
}

impl OutputFolder {
    /// Makes `folder` and checks that files named `names` may be written there.
    ///
    /// # Errors
    /// A folder that cannot be made or written to; a file that is there already, without `force`.
    pub fn claim(folder: &Path, force: bool, names: &[&str]) -> Result<Self, Failure> {
        let refuse = |error: std::io::Error| {
            Failure::new(format!("cannot write into {}: {error}", folder.display()))
        };
        std::fs::create_dir_all(folder).map_err(refuse)?;
        NamedTempFile::new_in(folder).map_err(refuse)?;
        let output = Self {
            folder: folder.to_owned(),
            force,
        };
        for name in names {
            output.refuse_existing(name)?;
        }
        Ok(output)
    }

    /// As [`OutputFolder::claim`] for the folder that `options` names, if any.
    ///
    /// # Errors
    /// As [`OutputFolder::claim`].
    pub fn claim_option(options: &OutputOptions, names: &[&str]) -> Result<Option<Self>, Failure> {
        options
            .out
            .as_deref()
            .map(|folder| Self::claim(folder, options.force, names))
            .transpose()
    }

    /// How to show the folder in messages.
    pub fn display(&self) -> std::path::Display<'_> {
        self.folder.display()
    }

    fn refuse_existing(&self, name: &str) -> Result<(), Failure> {
        let path = self.folder.join(name);
        if !self.force && path.exists() {
            return Err(Failure::new(format!(
                "{} is there already: choose another --out, or overwrite it with --force",
                path.display()
            )));
        }
        Ok(())
    }

    /// Where `name` will stand.
    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.join(name)
    }

    /// Writes `name` under a temporary name and renames it: readers see all of it or nothing.
    ///
    /// # Errors
    /// As the file system; a file that appeared since the claim, without `force`.
    pub fn write(&self, name: &str, bytes: &[u8]) -> Result<PathBuf, Failure> {
        self.write_with(name, |file| {
            file.write_all(bytes).map_err(|error| {
                Failure::new(format!(
                    "cannot write {}: {error}",
                    self.path(name).display()
                ))
            })
        })
    }

    /// As [`OutputFolder::write`], with the bytes made by `make` one after the other.
    ///
    /// # Errors
    /// As [`OutputFolder::write`], and the failure of `make`; nothing stays behind then.
    pub fn write_with(
        &self,
        name: &str,
        make: impl FnOnce(&mut File) -> Result<(), Failure>,
    ) -> Result<PathBuf, Failure> {
        self.refuse_existing(name)?;
        let path = self.path(name);
        let failed = |error: &dyn std::fmt::Display| {
            Failure::new(format!("cannot write {}: {error}", path.display()))
        };
        let mut file = NamedTempFile::new_in(&self.folder).map_err(|error| failed(&error))?;
        make(file.as_file_mut())?;
        file.flush().map_err(|error| failed(&error))?;
        make_readable(&file).map_err(|error| failed(&error))?;
        if self.force {
            file.persist(&path).map_err(|error| failed(&error.error))?;
        } else {
            file.persist_noclobber(&path)
                .map_err(|error| failed(&error.error))?;
        }
        Ok(path)
    }
}

/// Temporary files are private to their owner; results are as readable as any other file.
fn make_readable(file: &NamedTempFile) -> std::io::Result<()> {
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        file.as_file()
            .set_permissions(std::fs::Permissions::from_mode(0o644))?;
    }
    #[cfg(not(unix))]
    let _ = file;
    Ok(())
}
