//! Studies compiled into the program, so that it works from anywhere.

use std::io::{self, Cursor};

use crate::input::{Files, ReadSeek};

/// The study that `check` carries out without a file.
pub const DEFAULT_STUDY: &str = "tide-gauge.study.toml";

macro_rules! embedded {
    ($($name:literal)*) => {
        &[$(($name, include_bytes!(concat!("../../signals/", $name)))),*]
    };
}

const FILES: &[(&str, &[u8])] = embedded!(
    "tide-gauge.study.toml"
    "tide-gauge.stage.toml"
    "tide-gauge.wav"
);

/// The files of `signals/` that the built-in studies name.
#[derive(Debug, Clone, Copy, Default)]
pub struct BuiltIn;

impl Files for BuiltIn {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        FILES.iter().find(|(known, _)| *known == name).map_or_else(
            || {
                Err(io::Error::new(
                    io::ErrorKind::NotFound,
                    "no such built-in file",
                ))
            },
            |(_, bytes)| Ok(Box::new(Cursor::new(*bytes)) as Box<dyn ReadSeek>),
        )
    }

    fn display(&self, name: &str) -> String {
        format!("built-in {name}")
    }
}
