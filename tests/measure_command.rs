//! `quietedge measure` from the outside: JSON, exit codes, and what a capture cannot tell.

use std::path::Path;
use std::process::{Command, Output};

fn run(folder: &Path, arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_quietedge"))
        .args(arguments)
        .current_dir(folder)
        .output()
        .unwrap()
}

fn json(output: &Output) -> serde_json::Value {
    serde_json::from_slice(&output.stdout).unwrap_or_else(|_| panic!("{output:?}"))
}

fn signal(folder: &Path, name: &str) {
    let made = run(
        folder,
        &[
            "signal",
            "-q",
            "single-carrier",
            "--modulation",
            "qam16",
            "--symbol-rate",
            "10 kHz",
            "--rolloff",
            "0.3",
            "--oversampling",
            "8",
            "--symbols",
            "2000",
            "--periodic",
            "--out",
            name,
        ],
    );
    assert!(made.status.success(), "{made:?}");
}

#[test]
fn ratios_are_decided_and_powers_are_not() {
    let folder = tempfile::tempdir().unwrap();
    let at = folder.path();
    signal(at, "sent.sigmf-meta");
    let plain = run(at, &["measure", "sent.sigmf-meta", "--json"]);
    assert_eq!(plain.status.code(), Some(0));
    let document = json(&plain);
    let metrics = &document["metrics"];
    assert!(metrics["power_dbm"].is_null() && metrics["evm_percent"].is_null());
    assert!(document["verdict"].is_null());
    let occupied = metrics["occupied_hz"].as_f64().unwrap();
    assert!((9.5e3..12e3).contains(&occupied), "{occupied}");

    // A mask whose outer part depends on the power: undecided without a scale, and the reason says what to state.
    let mask = [
        "measure",
        "sent.sigmf-meta",
        "--json",
        "--limits",
        "fcc_90_210_mask_d",
    ];
    let unknown = json(&run(at, &mask));
    let checks = unknown["verdict"]["checks"].as_array().unwrap();
    let undecided = checks
        .iter()
        .filter(|check| check["outcome"] == "undecided")
        .collect::<Vec<_>>();
    assert!(!undecided.is_empty(), "{unknown}");
    for check in undecided {
        assert!(
            check["reason"].as_str().unwrap().contains("--full-scale"),
            "{check}"
        );
    }
    let scaled = [&mask[..], &["--full-scale", "37 dBm"]].concat();
    let known = json(&run(at, &scaled));
    let all = known["verdict"]["checks"].as_array().unwrap();
    assert!(
        all.iter().all(|check| check["outcome"] != "undecided"),
        "{known}"
    );
    // What was decided without a scale is the same with one.
    for check in checks
        .iter()
        .filter(|check| check["outcome"] != "undecided")
    {
        let twin = all
            .iter()
            .find(|other| other["name"] == check["name"])
            .unwrap();
        let margin = |check: &serde_json::Value| check["margin_db"].as_f64().unwrap();
        assert!(
            (margin(check) - margin(twin)).abs() < 1e-6,
            "{check} {twin}"
        );
    }
    let power = known["metrics"]["power_dbm"].as_f64().unwrap();
    let against = known["metrics"]["power_dbfs"].as_f64().unwrap();
    assert!((power - 37.0 - against).abs() < 1e-9);
}

#[test]
fn a_pair_is_aligned_and_its_symbols_are_read() {
    let folder = tempfile::tempdir().unwrap();
    let at = folder.path();
    signal(at, "sent.sigmf-meta");
    signal(at, "sent.wav");
    let output = run(
        at,
        &[
            "measure",
            "sent.wav",
            "--reference",
            "sent.sigmf-meta",
            "--json",
            "--out",
            "report",
            "--modulation",
            "qam16",
            "--symbol-rate",
            "10 kHz",
            "--rolloff",
            "0.3",
            "--evm-limit",
            "1 %",
        ],
    );
    assert_eq!(output.status.code(), Some(0), "{output:?}");
    let document = json(&output);
    assert_eq!(document["metrics"]["evm_of"], "symbols");
    // The generator's filter is cut off after 16 symbols: its own error is below 1 %.
    assert!(document["metrics"]["evm_percent"].as_f64().unwrap() < 1.0);
    assert!(
        document["metrics"]["waveform_evm_percent"]
            .as_f64()
            .unwrap()
            < 1e-3
    );
    assert!(document["alignment"]["delay_s"].as_f64().unwrap().abs() < 1e-9);
    let page = std::fs::read_to_string(at.join("report/report.html")).unwrap();
    for words in ["Constellation", "AM-AM", "AM-PM", "CCDF"] {
        assert!(page.contains(words), "{words}");
    }
    // Another signal is no reference, and the message says so.
    let other = run(
        at,
        &[
            "signal",
            "-q",
            "noise",
            "--bandwidth",
            "10 kHz",
            "--rate",
            "80 kHz",
            "--out",
            "other.wav",
        ],
    );
    assert!(other.status.success(), "{other:?}");
    let refused = run(
        at,
        &[
            "measure",
            "sent.wav",
            "--reference",
            "other.wav",
            "--repeats",
            "no",
        ],
    );
    assert_eq!(refused.status.code(), Some(2));
    let message = String::from_utf8_lossy(&refused.stderr).into_owned();
    assert!(message.contains("not found in the capture"), "{message}");
}

#[test]
fn a_study_gives_format_and_limits() {
    let folder = tempfile::tempdir().unwrap();
    let at = folder.path();
    signal(at, "sent.wav");
    let map = "# control = supply\n# frequency = 100 MHz\n# load_resistance = 50 ohm\ncontrol,amplitude_v,phase_deg\n0,0,0\n3,10,0\n6,20,0\n";
    std::fs::write(at.join("map.csv"), map).unwrap();
    let study = "map = \"map.csv\"\n[signal]\nfile = \"sent.wav\"\nlevel = 0.9\n[signal.format]\nkind = \"single_carrier\"\nmodulation = \"qam16\"\n\
                 symbol_rate = \"10 kHz\"\nrolloff = 0.3\n[scheme]\nkind = \"supply\"\n[limits]\nchannel = \"13 kHz\"\nevm_percent = 0.01\n";
    std::fs::write(at.join("a.study.toml"), study).unwrap();
    let arguments = [
        "measure",
        "sent.wav",
        "--reference",
        "sent.wav",
        "--study",
        "a.study.toml",
        "--json",
    ];
    let output = run(at, &arguments);
    // The generator's own error is above 0.01 %.
    assert_eq!(output.status.code(), Some(1), "{output:?}");
    let document = json(&output);
    assert_eq!(document["metrics"]["evm_of"], "symbols");
    assert_eq!(document["verdict"]["outcome"], "outside");
    let mut stated = arguments.to_vec();
    stated.extend(["--evm-limit", "2 %"]);
    assert_eq!(run(at, &stated).status.code(), Some(0));
    // Models of the pair: nothing but rounding is left of a signal against itself.
    let memory = &document["memory"];
    assert!(
        memory["linear"]["held_out_nmse_db"].as_f64().unwrap() < -80.0,
        "{memory}"
    );
}
