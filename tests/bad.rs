//! Files that are wrong: every file of the folders under `tests/bad/` is refused by the program with
//! exit code 2, nothing on stdout, and one message that says where and what, and what is allowed.
//!
//! The table `expected.txt` in each folder names each file, how it is read, the place, and parts of the
//! message. The files of `tests/bad/legal` are extreme but legal, and must be solved.

use std::collections::BTreeSet;
use std::io::{self, Cursor};
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use quietedge::input::{Files, ReadSeek};
use quietedge::signal::{Edge, FormatOptions, SignalError, open_pulses};

fn quietedge(arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_quietedge"))
        .args(arguments)
        .output()
        .unwrap()
}

/// One row of a table.
struct Row {
    file: String,
    how: String,
    place: String,
    parts: Vec<String>,
}

fn table(folder: &Path) -> Vec<Row> {
    let text = std::fs::read_to_string(folder.join("expected.txt")).unwrap();
    text.lines()
        .filter(|line| !line.starts_with('#'))
        .map(|line| {
            let cells: Vec<&str> = line.split(" | ").map(str::trim).collect();
            let [file, how, place, parts @ ..] = &cells[..] else {
                panic!("too few cells: {line}");
            };
            assert!(!parts.is_empty(), "nothing is expected of {file}");
            Row {
                file: (*file).to_owned(),
                how: (*how).to_owned(),
                place: (*place).to_owned(),
                parts: parts.iter().map(|part| (*part).to_owned()).collect(),
            }
        })
        .collect()
}

/// What is wrong with how the program refused something.
fn faults(output: &Output) -> (String, Vec<String>) {
    let message = String::from_utf8_lossy(&output.stderr).into_owned();
    let mut faults = Vec::new();
    if output.status.code() != Some(2) {
        faults.push(format!(
            "exit code {:?} in place of 2",
            output.status.code()
        ));
    }
    if !output.stdout.is_empty() {
        faults.push("something on stdout".to_owned());
    }
    if message.matches("quietedge: ").count() != 1 || !message.starts_with("quietedge: ") {
        faults.push("not exactly one message".to_owned());
    }
    if message.contains("panicked") || message.contains("RUST_BACKTRACE") {
        faults.push("a panic".to_owned());
    }
    if message.len() > 3000 {
        faults.push(format!("a message of {} bytes", message.len()));
    }
    (message, faults)
}

/// Walks the folder `name`; `read` makes the program read a file as the row says.
fn walk(name: &str, extensions: &[&str], least: usize, read: impl Fn(&str, &Row) -> Output) {
    let folder = Path::new("tests/bad").join(name);
    let rows = table(&folder);
    let mut wrong = Vec::new();
    for row in &rows {
        let path = format!("tests/bad/{name}/{}", row.file);
        let (message, mut faults) = faults(&read(&path, row));
        let place = match row.place.as_str() {
            "-" => row.file.clone(),
            line if line.parse::<usize>().is_ok() => format!("{}:{line}:", row.file),
            other => other.to_owned(),
        };
        for part in row.parts.iter().chain([&place]) {
            if !message.contains(part.as_str()) {
                faults.push(format!("no \"{part}\""));
            }
        }
        if !faults.is_empty() {
            wrong.push(format!("{path}: {} in: {message}", faults.join(", ")));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));

    let listed: BTreeSet<String> = rows.into_iter().map(|row| row.file).collect();
    let present: BTreeSet<String> = std::fs::read_dir(&folder)
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .filter(|file| file != "expected.txt")
        .filter(|file| {
            extensions.is_empty() || extensions.iter().any(|extension| file.ends_with(extension))
        })
        // A sidecar belongs to its signal.
        .filter(|file| {
            file.strip_suffix(".toml")
                .is_none_or(|signal| !folder.join(signal).exists())
        })
        .collect();
    assert_eq!(listed, present, "the table and the folder {name} differ");
    assert!(present.len() >= least, "only {} files", present.len());
}

#[test]
fn bad_stages_are_refused() {
    walk("stages", &[".toml"], 50, |path, _| {
        quietedge(&["solve", path])
    });
}

#[test]
fn bad_studies_are_refused() {
    walk("studies", &[".toml"], 50, |path, _| {
        quietedge(&["check", path])
    });
}

#[test]
fn bad_maps_are_refused() {
    let folder = tempfile::tempdir().unwrap();
    let here = std::env::current_dir().unwrap();
    walk("maps", &[".csv", ".json"], 35, |path, _| {
        let study = folder.path().join("study.toml");
        let text = format!(
            "map = '{}'\n[signal]\nfile = '{}'\nlevel = 0.9\n[scheme]\nkind = \"supply\"\n[limits]\nevm_percent = 5\n",
            here.join(path).display(),
            here.join("signals/tide-gauge.wav").display()
        );
        std::fs::write(&study, text).unwrap();
        quietedge(&["check", study.to_str().unwrap()])
    });
}

#[test]
fn bad_limits_are_refused() {
    walk("limits", &[".toml"], 30, |path, _| {
        quietedge(&["limits", "--file", path])
    });
}

#[test]
fn bad_signals_are_refused() {
    walk("signals", &[], 50, |path, row| {
        let mut words: Vec<&str> = row.how.split(' ').filter(|word| *word != "-").collect();
        if words.first() == Some(&"pulses") {
            return refused_pulses(path);
        }
        words.splice(0..0, ["signal", "show", path]);
        quietedge(&words)
    });
}

struct Folder(PathBuf);

impl Files for Folder {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        Ok(Box::new(Cursor::new(std::fs::read(self.0.join(name))?)))
    }
}

/// No command reads pulse sequences; the library's refusal in the form of a command's.
fn refused_pulses(path: &str) -> Output {
    let read = || -> Result<(), SignalError> {
        let mut source = open_pulses(&Folder(PathBuf::new()), path, &FormatOptions::default())?;
        let none = Edge {
            time_s: 0.0,
            level: 0.0,
        };
        let mut block = [none; 64];
        while source.read(&mut block)? > 0 {}
        Ok(())
    };
    let stderr = match read() {
        Ok(()) => String::new(),
        Err(error) => format!("quietedge: {error}"),
    };
    Output {
        status: quietedge(&["no-such-command"]).status,
        stdout: Vec::new(),
        stderr: stderr.into_bytes(),
    }
}

#[test]
fn texts_of_absurd_size_and_shape_are_refused_shortly() {
    let folder = tempfile::tempdir().unwrap();
    let million = "x".repeat(1 << 20);
    let cases = [
        (
            "value.toml",
            format!("frequency = \"{million}\"\n"),
            "value.toml:1:13: frequency",
        ),
        (
            "key.toml",
            format!("frequency = 1e8\n{million} = 1\n"),
            "allowed: ",
        ),
        (
            "syntax.toml",
            format!("a = 1 {million}\n"),
            "syntax.toml:1:",
        ),
        (
            "comment.toml",
            format!("# {million}\n"),
            "frequency: given nothing",
        ),
        (
            "lists.toml",
            format!("a = {}\n", "[".repeat(100_000)),
            "lists.toml:1:",
        ),
        (
            "tables.toml",
            format!("a = {}1{}\n", "{a=".repeat(5000), "}".repeat(5000)),
            "tables.toml:1:",
        ),
        (
            "dots.toml",
            format!("a{} = 1\n", ".a".repeat(50_000)),
            "dots.toml",
        ),
        (
            "ladder.toml",
            format!(
                "frequency = 1e8\n[supply]\nvoltage = 1\n[drain]\ncapacitance = 1e-12\n[load]\nresistance = 1\n{}",
                "[[load.ladder]]\nseries = { inductance = 1e-9 }\n".repeat(20_000)
            ),
            "switch: given nothing",
        ),
    ];
    for (name, text, part) in cases {
        let path = folder.path().join(name);
        std::fs::write(&path, text).unwrap();
        let (message, faults) = faults(&quietedge(&["solve", path.to_str().unwrap()]));
        let shown: String = message.chars().take(600).collect();
        assert!(faults.is_empty(), "{name}: {faults:?} in {shown}");
        assert!(message.contains(part), "{name}: no {part} in {shown}");
    }
    let path = folder.path().join("endless.toml");
    std::fs::write(&path, vec![b'#'; (16 << 20) + 1]).unwrap();
    let (message, faults) = faults(&quietedge(&["solve", path.to_str().unwrap()]));
    assert!(faults.is_empty(), "{faults:?}");
    assert!(message.contains("longer than 16777216 bytes"), "{message}");
}

#[test]
fn extreme_but_legal_stages_are_solved() {
    let mut count = 0;
    for entry in std::fs::read_dir("tests/bad/legal").unwrap() {
        let path = entry.unwrap().path();
        let output = quietedge(&["solve", path.to_str().unwrap(), "--json"]);
        assert_eq!(output.status.code(), Some(0), "{}", path.display());
        let document: serde_json::Value = serde_json::from_slice(&output.stdout).unwrap();
        // The library accepts 1e-6; a null (not finite) is no number.
        let residual = document["orbit"]["energy_residual"].as_f64().unwrap();
        assert!(residual.abs() < 1e-6, "{}: {residual}", path.display());
        assert!(document["orbit"]["output_w"].as_f64().unwrap() >= 0.0);
        assert!(document["orbit"]["switch_peak_v"].as_f64().unwrap() > 0.0);
        count += 1;
    }
    assert!(count >= 15);
}
