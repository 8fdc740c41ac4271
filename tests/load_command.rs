//! `map --control load` and ratings from outside: exit codes, documents, files.

use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use serde_json::Value;

fn stage() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("signals/tide-gauge.stage.toml")
}

fn run(arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_quietedge"))
        .arg(arguments[0])
        .arg(stage())
        .args(&arguments[1..])
        .output()
        .expect("the program runs")
}

fn document(output: &Output) -> Value {
    serde_json::from_slice(&output.stdout).expect("one document")
}

fn code(output: &Output) -> Option<i32> {
    output.status.code()
}

fn stderr(output: &Output) -> String {
    String::from_utf8_lossy(&output.stderr).into_owned()
}

const LOAD: [&str; 7] = ["map", "--control", "load", "--vswr", "2", "--points", "12"];

#[test]
fn a_turn_of_the_load_is_a_document_with_the_contracts_names() {
    let output = run(&[&LOAD[..], &["--json"]].concat());
    assert_eq!(code(&output), Some(0), "{}", stderr(&output));
    let document = document(&output);
    assert_eq!(document["control"], "load");
    assert_eq!(document["failures"], serde_json::json!([]));
    let points = document["points"].as_array().expect("points");
    assert_eq!(points.len(), 12);
    for (index, point) in points.iter().enumerate() {
        for key in [
            "control",
            "output_v",
            "output_w",
            "supply_a",
            "efficiency",
            "switch_peak_v",
            "switch_peak_a",
            "closing_v",
            "reflection",
            "load_ohm",
            "angle_deg",
        ] {
            assert!(!point[key].is_null(), "{key}");
        }
        let degrees = point["angle_deg"].as_f64().expect("a number");
        assert!((degrees - 30.0 * index as f64).abs() < 1e-9);
        // No verdict was asked for.
        assert!(point["outcome"].is_null());
    }
    assert!(document["verdict"].is_null());
}

#[test]
fn ratings_decide_the_exit_code_of_every_command() {
    let within = ["--peak-voltage", "100V", "--peak-current", "200A", "--json"];
    let outside = ["--peak-voltage", "20V", "--json"];
    for command in [
        &LOAD[..],
        &["map", "--control", "supply", "--points", "11"],
        &["map", "--control", "width", "--points", "11"],
        &["solve"],
    ] {
        let output = run(&[command, &within].concat());
        assert_eq!(code(&output), Some(0), "{command:?} {}", stderr(&output));
        let found = document(&output);
        assert_eq!(found["verdict"]["outcome"], "within");
        assert_eq!(found["verdict"]["checks"].as_array().map(Vec::len), Some(2));

        let output = run(&[command, &outside].concat());
        assert_eq!(code(&output), Some(1), "{command:?} {}", stderr(&output));
        let found = document(&output);
        assert_eq!(found["verdict"]["outcome"], "outside");
        assert_eq!(found["ratings"]["peak_voltage_v"], 20.0);
        if let Some(points) = found["points"].as_array() {
            for point in points {
                let peak_v = point["switch_peak_v"].as_f64().expect("a number");
                let expected = if peak_v <= 20.0 { "within" } else { "outside" };
                assert_eq!(point["outcome"], expected);
            }
        }
    }
}

#[test]
fn what_makes_no_sense_is_refused_in_words() {
    for (arguments, words) in [
        (&["map", "--control", "load"][..], "needs --vswr"),
        (
            &["map", "--control", "load", "--vswr", "0.5"],
            "allowed 1 to 199",
        ),
        (
            &[
                "map",
                "--control",
                "load",
                "--vswr",
                "2",
                "--reflection-angle",
                "3deg",
            ],
            "--from and --to",
        ),
        (
            &["map", "--control", "load", "--vswr", "2", "--from", "4V"],
            "--from: given \"4V\"",
        ),
        (&["solve", "--vswr", "2"], "needs --reflection-angle"),
        (
            &["solve", "--vswr", "300", "--reflection-angle", "3deg"],
            "allowed: 1 to 199",
        ),
        (&["solve", "--peak-voltage", "0V"], "more than 0"),
    ] {
        let output = run(arguments);
        assert_eq!(code(&output), Some(2), "{arguments:?}");
        assert!(output.stdout.is_empty());
        let said = stderr(&output);
        assert!(said.contains(words), "{arguments:?}: {said}");
    }
}

#[test]
fn files_hold_the_worst_load_and_its_pictures() {
    let folder = tempfile::tempdir().expect("a folder");
    let out = folder.path().display().to_string();
    let options = ["--out", &out, "--peak-voltage", "22V", "-q"];
    let output = run(&[&LOAD[..], &options].concat());
    assert_eq!(code(&output), Some(1), "{}", stderr(&output));
    let text = String::from_utf8_lossy(&output.stdout);
    assert!(
        text.contains("peak drain voltage") && text.contains("rated 22 V"),
        "{text}"
    );
    let read = |name: &str| std::fs::read(folder.path().join(name)).expect(name);
    let csv = String::from_utf8(read("load-map.csv")).expect("text");
    let rows: Vec<&str> = csv.lines().filter(|line| !line.starts_with('#')).collect();
    assert_eq!(rows.len(), 13);
    assert!(rows[0].starts_with("angle_deg,load_re_ohm") && rows[0].ends_with(",ratings"));
    assert!(rows.iter().any(|row| row.ends_with(",outside")));
    for name in ["load-map.svg", "load-wheel.svg"] {
        assert!(read(name).starts_with(b"<"), "{name}");
    }
    for name in ["load-map.png", "load-wheel.png"] {
        assert!(read(name).starts_with(b"\x89PNG"), "{name}");
    }
    assert_eq!(
        serde_json::from_slice::<Value>(&read("load-map.json")).expect("JSON")["vswr"],
        2.0
    );
}
