//! `quietedge predistort` from the outside.

use std::path::Path;
use std::process::{Command, Output};

use num_complex::Complex64;
use serde_json::Value;

use super::{map_of, map_text};

fn run(folder: &Path, arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_quietedge"))
        .args(arguments)
        .current_dir(folder)
        .output()
        .expect("the program runs")
}

/// A short study of a bent stage.
fn folder() -> tempfile::TempDir {
    let folder = tempfile::tempdir().expect("a folder");
    let write = |name: &str, bytes: &[u8]| {
        std::fs::write(folder.path().join(name), bytes).expect("written")
    };
    let map = map_of(8.0, 101, |u| {
        Complex64::from_polar(20.0 * (1.3 * u - 0.3 * u * u), 0.4 * u * u)
    });
    write("map.csv", &map_text(&map));
    let mut signal = "i,q\n".to_owned();
    for n in 0..4000 {
        let t = f64::from(n);
        let x = 0.45 * Complex64::cis(0.31 * t)
            + 0.35 * Complex64::cis(-0.22 * t + 0.001 * (0.01 * t).sin())
            + 0.15 * Complex64::cis(0.097 * t);
        signal.push_str(&format!("{},{}\n", x.re, x.im));
    }
    write("signal.csv", signal.as_bytes());
    write(
        "a.study.toml",
        b"title = \"Bent stage\"\nmap = \"map.csv\"\n[signal]\nfile = \"signal.csv\"\nrate = \"1 MHz\"\nlevel = 0.9\n\
          [scheme]\nkind = \"supply\"\n[limits]\nchannel = \"200 kHz\"\nevm_percent = 1.5\n",
    );
    folder
}

const FILES: [&str; 9] = [
    "report.html",
    "result.json",
    "spectrum.png",
    "table.csv",
    "table.json",
    "table.npy",
    "table.hex",
    "table.h",
    "table.png",
];

#[test]
fn a_study_is_mended_written_and_checked_again() {
    let folder = folder();
    assert_eq!(
        run(folder.path(), &["check", "a.study.toml", "-q"])
            .status
            .code(),
        Some(1)
    );
    let made = run(
        folder.path(),
        &[
            "predistort",
            "a.study.toml",
            "--depth",
            "64",
            "--rate",
            "4",
            "--out",
            "made",
            "--json",
            "--polynomial",
            "cross",
            "--power",
            "4",
            "--lags",
            "0",
        ],
    );
    assert_eq!(
        made.status.code(),
        Some(0),
        "{}",
        String::from_utf8_lossy(&made.stderr)
    );
    let document: Value = serde_json::from_slice(&made.stdout).expect("one document");
    assert_eq!(document["verdict"]["outcome"], "within");
    assert_eq!(document["before"]["verdict"]["outcome"], "outside");
    assert_eq!(document["table"]["size"]["depth"], 64);
    assert_eq!(document["polynomial"]["learned"]["fit"]["terms"], 5 + 8);
    let evm = |value: &Value| value["metrics"]["evm_percent"].as_f64().expect("an EVM");
    assert!(evm(&document["before"]) > 10.0 * evm(&document));
    assert!(evm(&document["before"]) > 10.0 * evm(&document["polynomial"]["after"]));
    let path = |name: &str| folder.path().join("made").join(name);
    for name in FILES.iter().chain(&["polynomial.json", "polynomial.csv"]) {
        assert!(path(name).metadata().expect(name).len() > 100, "{name}");
    }
    assert_eq!(std::fs::read_dir(path("")).expect("a folder").count(), 11);

    // Nothing is overwritten unasked.
    let table = std::fs::read(path("table.json")).expect("the table");
    let again = run(
        folder.path(),
        &["predistort", "a.study.toml", "--out", "made"],
    );
    assert_eq!(again.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&again.stderr).contains("--force"));
    assert_eq!(std::fs::read(path("table.json")).expect("the table"), table);

    // The study with the table says the same.
    let study = std::fs::read_to_string(folder.path().join("a.study.toml")).expect("the study");
    let with = format!("{study}\n[predistort]\ntable = \"made/table.json\"\n");
    std::fs::write(folder.path().join("b.study.toml"), with).expect("written");
    let checked = run(folder.path(), &["check", "b.study.toml", "--json"]);
    assert_eq!(
        checked.status.code(),
        Some(0),
        "{}",
        String::from_utf8_lossy(&checked.stderr)
    );
    let check: Value = serde_json::from_slice(&checked.stdout).expect("one document");
    assert_eq!(check["metrics"], document["metrics"]);
}

#[test]
fn the_smallest_table_is_searched() {
    let folder = folder();
    let arguments = [
        "predistort",
        "a.study.toml",
        "--search",
        "--reserve",
        "6 dB",
        "--rate",
        "1",
        "--json",
    ];
    let made = run(folder.path(), &arguments);
    assert_eq!(
        made.status.code(),
        Some(0),
        "{}",
        String::from_utf8_lossy(&made.stderr)
    );
    let document: Value = serde_json::from_slice(&made.stdout).expect("one document");
    let search = &document["search"];
    assert_eq!(search["end"], "found");
    assert_eq!(search["sweeps"].as_array().expect("sweeps").len(), 6);
    let combined = search["combined"].as_array().expect("combinations");
    let margin = |row: &Value| row["margin_db"].as_f64().expect("a margin");
    let (last, before) = combined.split_last().expect("some were tried");
    assert!(margin(last) >= 6.0);
    assert!(before.iter().all(|row| margin(row) < 6.0));
    assert_eq!(search["table"]["size"], document["table"]["size"]);

    let beyond = [
        "predistort",
        "a.study.toml",
        "--search",
        "--reserve",
        "200 dB",
        "--rate",
        "1",
    ];
    let text = String::from_utf8(run(folder.path(), &beyond).stdout).expect("text");
    assert!(
        text.contains("No table keeps every limit with 200 dB to spare"),
        "{text}"
    );
}

#[test]
fn options_that_make_no_table_are_refused() {
    let folder = folder();
    for (given, said) in [
        (vec!["--depth", "1"], "--depth"),
        (vec!["--phase-bits", "30"], "--phase-bits"),
        (vec!["--rate", "3"], "power of two"),
        (vec!["--mu", "3"], "companded"),
        (vec!["--spacing", "companded", "--mu=-2"], "mu = -2"),
        (vec!["--search", "--depth", "64"], "cannot be used with"),
        (vec!["--full-output", "0 V"], "more than 0 V"),
        (vec!["--power", "3"], "--polynomial"),
    ] {
        let mut arguments = vec!["predistort", "a.study.toml"];
        arguments.extend(given.iter().copied());
        let output = run(folder.path(), &arguments);
        let text = String::from_utf8_lossy(&output.stderr).into_owned();
        assert_eq!(output.status.code(), Some(2), "{given:?}: {text}");
        assert!(text.contains(said), "{given:?}: {text}");
    }
}

#[test]
fn a_polynomial_is_read_back_and_does_the_same() {
    let folder = folder();
    let arguments = [
        "predistort",
        "a.study.toml",
        "--rate",
        "4",
        "--polynomial",
        "memory",
        "--power",
        "4",
        "--lags",
        "1",
        "--out",
        "made",
        "--json",
    ];
    let made = run(folder.path(), &arguments);
    let document: Value = serde_json::from_slice(&made.stdout).expect("one document");
    let text = std::fs::read(folder.path().join("made/polynomial.json")).expect("a polynomial");
    let file: Value = serde_json::from_slice(&text).expect("JSON");
    let bits = file["words"]["bits"].as_i64().expect("bits") as i32;
    let exponent = file["words"]["exponent"].as_i64().expect("an exponent") as i32;
    assert!((6..=24).contains(&bits), "{bits}");
    for term in file["terms"].as_array().expect("terms") {
        for (word, value) in [("re_word", "re"), ("im_word", "im")] {
            let word = term[word].as_i64().expect("a word");
            assert!(word.unsigned_abs() <= 1 << (bits - 1));
            assert_eq!(
                word as f64 * 2f64.powi(exponent - bits + 1),
                term[value].as_f64().expect("a part")
            );
        }
    }
    let study = std::fs::read_to_string(folder.path().join("a.study.toml")).expect("a study");
    let write = |keys: &str| {
        let text = format!("{study}[predistort]\n{keys}\n");
        std::fs::write(folder.path().join("b.study.toml"), text).expect("written");
    };
    write("polynomial = \"made/polynomial.json\"");
    let again = run(folder.path(), &["check", "b.study.toml", "--json"]);
    let checked: Value = serde_json::from_slice(&again.stdout).expect("one document");
    assert_eq!(
        checked["metrics"],
        document["polynomial"]["after"]["metrics"]
    );
    write("polynomial = \"made/polynomial.json\"\ndepth = 16");
    let refused = run(folder.path(), &["check", "b.study.toml"]);
    assert_eq!(refused.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&refused.stderr).contains("depth"));
    write("polynomial = \"made/table.json\"");
    assert_eq!(
        run(folder.path(), &["check", "b.study.toml"]).status.code(),
        Some(2)
    );
}
