//! Every file of `tests/bad/signals` is refused with a message that says what is wrong.
//!
//! `expected.txt` beside them lists the files and a phrase of each message.

use std::collections::BTreeSet;
use std::io::{self, Cursor};
use std::path::{Path, PathBuf};

use num_complex::Complex64;
use quietedge::input::{Files, ReadSeek};
use quietedge::signal::{Edge, FormatOptions, SignalError, open, open_pulses};

struct Folder(PathBuf);

impl Files for Folder {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        Ok(Box::new(Cursor::new(std::fs::read(self.0.join(name))?)))
    }
}

fn read_signal(folder: &Folder, name: &str, options: &FormatOptions) -> Result<(), SignalError> {
    let mut source = open(folder, name, options)?;
    let mut block = [Complex64::ZERO; 64];
    while source.read(&mut block)? > 0 {}
    Ok(())
}

fn read_pulses(folder: &Folder, name: &str, options: &FormatOptions) -> Result<(), SignalError> {
    let mut source = open_pulses(folder, name, options)?;
    let none = Edge {
        time_s: 0.0,
        level: 0.0,
    };
    let mut block = [none; 64];
    while source.read(&mut block)? > 0 {}
    Ok(())
}

#[test]
fn every_bad_signal_is_refused_with_its_reason() {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/bad/signals");
    let table = std::fs::read_to_string(path.join("expected.txt")).unwrap();
    let mut listed = BTreeSet::from(["expected.txt".to_owned()]);
    let folder = Folder(path.clone());
    let mut wrong = Vec::new();
    for line in table.lines().filter(|line| !line.starts_with('#')) {
        let fields: Vec<&str> = line.splitn(4, " | ").collect();
        let [name, kind, rate, phrase] = fields[..] else {
            panic!("expected.txt: {line}");
        };
        listed.insert(name.to_owned());
        let options = FormatOptions {
            rate_hz: (!rate.is_empty()).then(|| rate.parse().unwrap()),
            ..FormatOptions::default()
        };
        let result = match kind {
            "iq" => read_signal(&folder, name, &options),
            "pulses" => read_pulses(&folder, name, &options),
            other => panic!("expected.txt: {other}"),
        };
        match result {
            Ok(()) => wrong.push(format!("{name}: read without a complaint")),
            Err(error) => {
                let message = error.to_string();
                if !message.contains(phrase) || !message.contains(name) {
                    wrong.push(format!("{name}: \"{message}\" lacks \"{phrase}\""));
                }
            }
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));

    for entry in std::fs::read_dir(&path).unwrap() {
        let name = entry.unwrap().file_name().into_string().unwrap();
        let signal = name.strip_suffix(".toml").unwrap_or(&name);
        assert!(listed.contains(signal), "{name} is not in expected.txt");
    }
}
