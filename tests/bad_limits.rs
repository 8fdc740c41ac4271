//! Bad limits files: each is refused with exit code 2 and a message that names the file, the line,
//! the key, what was given and what is allowed. The table beside them holds what is expected.

use std::collections::BTreeSet;
use std::path::Path;
use std::process::Command;

const FOLDER: &str = "tests/bad/limits";

#[test]
fn every_bad_limits_file_is_refused_with_its_reason() {
    let table = std::fs::read_to_string(Path::new(FOLDER).join("expected.txt")).unwrap();
    let mut listed = BTreeSet::new();
    for row in table.lines().filter(|line| !line.starts_with('#')) {
        let cells: Vec<&str> = row.splitn(5, '|').map(str::trim).collect();
        let [name, line, key, given, allowed] = cells[..] else {
            panic!("not five cells: {row}");
        };
        listed.insert(name.to_owned());
        let path = format!("{FOLDER}/{name}");
        let output = Command::new(env!("CARGO_BIN_EXE_quietedge"))
            .args(["limits", "--file", &path])
            .output()
            .unwrap();
        let message = String::from_utf8(output.stderr).unwrap();
        assert_eq!(output.status.code(), Some(2), "{name}: {message}");
        assert!(output.stdout.is_empty(), "{name} wrote to stdout");
        let place = match line {
            "-" => path.clone(),
            line => format!("{path}:{line}:"),
        };
        let key = if key == "-" { "" } else { key };
        for part in [
            place.as_str(),
            key,
            &format!("given {given}"),
            &format!("allowed: {allowed}"),
        ] {
            assert!(message.contains(part), "{name}: no \"{part}\" in {message}");
        }
        assert!(!message.contains("panicked"), "{name}: {message}");
    }
    let present: BTreeSet<String> = std::fs::read_dir(FOLDER)
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .filter(|name| name.ends_with(".toml"))
        .collect();
    assert_eq!(listed, present, "the table and the folder differ");
    assert!(present.len() >= 30);
}
