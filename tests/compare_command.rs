//! `quietedge compare` from outside: table, document, report, threads, and what it refuses.

use std::path::Path;
use std::process::{Command, Output};

use serde_json::Value;
use tempfile::TempDir;

fn run(folder: &Path, arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_quietedge"))
        .current_dir(folder)
        .args(arguments)
        .output()
        .unwrap()
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).unwrap()
}

const HEAD: &str = "title = \"Side by side\"\nstage = \"stage.toml\"\n[signal]\nfile = \"signal.wav\"\nlevel = 0.9\n[limits]\nchannel = \"6 kHz\"\nevm_percent = 3\nacpr = [{ offset = \"8 kHz\", bandwidth = \"6 kHz\", limit = \"-30 dB\" }]\n";

const SCHEMES: &str = "[[scheme]]
kind = \"supply\"
floor = 0.05
modulator = { bandwidth = \"60 kHz\", efficiency = 0.9 }
phase_path = { delay = \"3.75 us\" }
[[scheme]]
kind = \"width\"
jitter = \"2 ps\"
grid = \"80 ps\"
seed = 3
[[scheme]]
kind = \"levels\"
count = 2
settling = \"2 us\"
[[scheme]]
kind = \"outphase\"
combining = \"isolated\"
mismatch = { phase = \"1 deg\" }
[[scheme]]
kind = \"class_b\"
";

/// The demo stage, a short signal and a study of five schemes.
fn bench() -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    let signals = Path::new(env!("CARGO_MANIFEST_DIR")).join("signals");
    std::fs::copy(
        signals.join("tide-gauge.stage.toml"),
        folder.path().join("stage.toml"),
    )
    .unwrap();
    let made = run(
        folder.path(),
        &[
            "signal",
            "single-carrier",
            "--symbol-rate",
            "4.8kHz",
            "--symbols",
            "400",
            "--out",
            "signal.wav",
        ],
    );
    assert!(made.status.success(), "{}", text(&made.stderr));
    std::fs::write(
        folder.path().join("compare.toml"),
        format!("{HEAD}{SCHEMES}"),
    )
    .unwrap();
    folder
}

fn document(folder: &Path, arguments: &[&str]) -> Value {
    let output = run(folder, arguments);
    serde_json::from_slice(&output.stdout)
        .unwrap_or_else(|error| panic!("{error}: {}", text(&output.stderr)))
}

#[test]
fn every_scheme_stands_in_the_table_without_and_with_predistortion() {
    let folder = bench();
    let output = run(
        folder.path(),
        &["compare", "compare.toml", "--out", "report"],
    );
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    let printed = text(&output.stdout);
    for row in [
        // The supply map of a linear stage is a straight line.
        ("supply (1)", "nothing to undo"),
        ("width (2)", "no"),
        ("width (2)", "yes"),
        ("levels (3)", "no"),
        ("levels (3)", "yes"),
        ("outphase (4)", "nothing to undo"),
        ("class_b (5)", "nothing to undo"),
    ] {
        let found = printed.lines().any(|line| {
            let mut rest = line.split_once(row.0).map(|(_, rest)| rest.trim_start());
            rest.take().is_some_and(|rest| rest.starts_with(row.1))
        });
        assert!(found, "no row {row:?} in\n{printed}");
    }
    // What one caution says of all stands there once; the coarse grid names the scheme that it is for.
    let mut lines: Vec<&str> = printed
        .lines()
        .filter(|line| line.starts_with("- "))
        .collect();
    let count = lines.len();
    lines.sort_unstable();
    lines.dedup();
    assert_eq!(lines.len(), count, "{printed}");
    assert!(
        lines
            .iter()
            .any(|line| line.contains("width (2)") && line.contains("too coarse"))
    );
    assert!(printed.contains("cannot follow"), "{printed}");

    let mut names: Vec<String> = std::fs::read_dir(folder.path().join("report"))
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .collect();
    names.sort();
    assert_eq!(
        names,
        [
            "compare.html",
            "compare.json",
            "spectra-predistorted.png",
            "spectra.png"
        ]
    );
    let html = std::fs::read_to_string(folder.path().join("report/compare.html")).unwrap();
    for part in [
        "Output spectra without predistortion",
        "Output spectra with predistortion",
        "Efficiency over output",
        "density of the signal",
        "Efficiency by its factors, and stress",
        "seed",
    ] {
        assert!(html.contains(part), "no {part}");
    }
}

#[test]
fn the_document_has_settings_parts_and_one_span() {
    let folder = bench();
    let document = document(folder.path(), &["compare", "compare.toml", "--json"]);
    let schemes = document["schemes"].as_array().unwrap();
    assert_eq!(schemes.len(), 7);
    assert_eq!(document["ranking"].as_array().unwrap().len(), 7);
    let rate = schemes[0]["sampling"]["rate_hz"].as_f64().unwrap();
    for scheme in schemes {
        for key in [
            "scheme_settings",
            "seed",
            "stress",
            "number",
            "predistorted",
            "follows",
            "worst_acpr_db",
            "backoff",
        ] {
            assert!(scheme.get(key).is_some(), "no {key}");
        }
        // All at one rate, unless sampling was refined.
        let own = scheme["sampling"]["rate_hz"].as_f64().unwrap();
        assert!(own >= rate, "{own} {rate}");
        let metrics = &scheme["metrics"];
        let parts = &metrics["efficiency_parts"];
        let product: f64 = ["modulator", "stage", "driver", "combiner", "filter"]
            .iter()
            .map(|part| parts[part].as_f64().unwrap())
            .product();
        let efficiency = metrics["efficiency"].as_f64().unwrap();
        assert!((product / efficiency - 1.0).abs() < 1e-12);
    }
    assert_eq!(schemes[1]["seed"], 3);
    assert_eq!(schemes[1]["scheme_settings"]["width"]["law"], "sine");
    assert_eq!(schemes[2]["scheme_settings"]["width"]["law"], "inverse");
    assert_eq!(schemes[2]["follows"], false);
    // Full output is the end of every curve over back-off; class B has pi/4 there.
    let last = schemes[6]["backoff"].as_array().unwrap().last().unwrap();
    assert!((last["efficiency"].as_f64().unwrap() - std::f64::consts::FRAC_PI_4).abs() < 1e-9);
    assert_eq!(last["output_db"], 0.0);

    // One scheme alone, by `check`, has its settings and seed in its document as well.
    let study = format!("{HEAD}[scheme]\nkind = \"width\"\njitter = \"2 ps\"\nseed = 3\n");
    std::fs::write(folder.path().join("width.toml"), study).unwrap();
    let alone = self::document(folder.path(), &["check", "width.toml", "--json"]);
    assert_eq!(alone["seed"], 3);
    assert_eq!(alone["scheme_settings"]["width"]["law"], "inverse");
}

#[test]
fn any_number_of_threads_gives_the_same_bytes() {
    let folder = bench();
    let of = |threads: &str| {
        let arguments = ["compare", "compare.toml", "--json", "--threads", threads];
        let output = run(folder.path(), &arguments);
        assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
        output.stdout
    };
    let one = of("1");
    assert_eq!(one, of("2"));
    assert_eq!(one, of("3"));
}

#[test]
fn the_ranking_puts_verdict_then_efficiency_first() {
    let folder = bench();
    let document = document(folder.path(), &["compare", "compare.toml", "--json"]);
    let rows: Vec<(String, f64)> = document["ranking"]
        .as_array()
        .unwrap()
        .iter()
        .map(|rank| {
            let scheme = &document["schemes"][rank["index"].as_u64().unwrap() as usize];
            let outcome = scheme["verdict"]["outcome"].as_str().unwrap();
            assert!(rank["reason"].as_str().unwrap().starts_with(outcome));
            let kind = format!("{outcome} {}", scheme["follows"]);
            (kind, scheme["metrics"]["efficiency"].as_f64().unwrap())
        })
        .collect();
    let within: Vec<f64> = rows
        .iter()
        .take_while(|row| row.0 == "within true")
        .map(|row| row.1)
        .collect();
    assert!(
        rows[within.len()..]
            .iter()
            .all(|row| row.0 != "within true")
    );
    assert!(within.len() >= 2, "{rows:?}");
    // A scheme stands before its predistorted self where that gains less than a tenth of a point.
    assert!(
        within.windows(2).all(|pair| pair[0] > pair[1] - 1e-3),
        "{within:?}"
    );
}

#[test]
fn several_studies_are_one_comparison_and_wrong_ones_are_named() {
    let folder = bench();
    let path = folder.path();
    for (name, scheme) in [
        ("a.toml", "kind = \"class_b\""),
        ("b.toml", "kind = \"outphase\"\ncombining = \"isolated\""),
    ] {
        std::fs::write(path.join(name), format!("{HEAD}[scheme]\n{scheme}\n")).unwrap();
    }
    let document = document(path, &["compare", "a.toml", "b.toml", "--json"]);
    assert_eq!(document["schemes"].as_array().unwrap().len(), 2);

    let wrong = format!("{HEAD}{SCHEMES}").replace("count = 2", "count = 0");
    std::fs::write(path.join("wrong.toml"), wrong).unwrap();
    let missing = format!("{HEAD}{SCHEMES}").replace("signal.wav", "none.wav");
    std::fs::write(path.join("missing.toml"), missing).unwrap();
    for (arguments, part) in [
        (&["compare", "wrong.toml"][..], "scheme[3].count"),
        (&["compare", "missing.toml"], "none.wav"),
        (&["compare", "a.toml", "none.toml"], "none.toml"),
        (&["compare"], "STUDIES"),
        (&["compare", "a.toml", "--threads", "0"], "--threads"),
        (&["check", "compare.toml"], "compare"),
    ] {
        let output = run(path, arguments);
        assert_eq!(output.status.code(), Some(2), "{arguments:?}");
        assert!(output.stdout.is_empty(), "{arguments:?}");
        let message = text(&output.stderr);
        assert!(message.contains(part), "{arguments:?}: {message}");
    }
}

#[test]
fn the_readmes_table_is_what_is_printed() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let output = run(root, &["compare", "signals/tide-gauge-compare.study.toml"]);
    let readme = std::fs::read_to_string(root.join("README.md")).unwrap();
    let block = readme
        .split("<!-- output of `quietedge compare signals/tide-gauge-compare.study.toml` -->\n```text\n")
        .nth(1)
        .and_then(|rest| rest.split("\n```\n").next())
        .expect("the marked block of README.md");
    assert_eq!(
        block.trim_end(),
        text(&output.stdout).trim_end(),
        "README.md is out of date: run .ci/readme"
    );
}
