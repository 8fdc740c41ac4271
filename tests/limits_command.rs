//! `quietedge limits`: what it lists, shows and refuses.

use std::process::{Command, Output};

fn limits(arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_quietedge"))
        .arg("limits")
        .args(arguments)
        .output()
        .unwrap()
}

fn json(arguments: &[&str]) -> serde_json::Value {
    let output = limits(&[arguments, &["--json"]].concat());
    assert_eq!(output.status.code(), Some(0));
    serde_json::from_slice(&output.stdout).unwrap()
}

#[test]
fn lists_every_set_and_marks_what_was_not_read() {
    let sets = json(&[])["sets"].as_array().unwrap().clone();
    assert_eq!(sets.len(), 34);
    let text = String::from_utf8(limits(&[]).stdout).unwrap();
    for set in sets {
        let name = set["name"].as_str().unwrap();
        let row = text
            .lines()
            .find(|line| line.split_whitespace().take(2).any(|word| word == name));
        let row = row.unwrap_or_else(|| panic!("{name} is not listed"));
        assert_eq!(row.starts_with('!'), set["obtained"] != "read", "{row}");
    }
}

#[test]
fn shows_levels_at_a_power() {
    let set = json(&["fcc_90_210_mask_d", "--power", "5 W"]);
    assert_eq!(set["kind"], "mask");
    assert_eq!(set["provenance"]["obtained"], "read");
    let db = set["evaluated"][2]["at_from"]["db"].as_f64().unwrap();
    // -(50 + 10 log10 5), and a power of 36.99 dBm is 5.0003 W.
    assert!((db + 56.989_700_043).abs() < 1e-6, "{db}");
    let text = String::from_utf8(limits(&["fcc_90_210_mask_d", "--power", "36.99 dBm"]).stdout);
    assert!(text.unwrap().contains("-56.99 dB"));
    let open = String::from_utf8(limits(&["fcc_90_210_mask_b"]).stdout).unwrap();
    assert!(open.contains("with --authorized-bandwidth"), "{open}");
}

#[test]
fn refuses_with_advice() {
    for (arguments, advice) in [
        (
            &["fcc_90_210_maskd"][..],
            "did you mean \"fcc_90_210_mask_d\"?",
        ),
        (
            &["edge_evm", "--class", "mobil"],
            "did you mean \"mobile\"?",
        ),
        (&["--file", "no.such.toml"], "no.such.toml"),
        (&["fcc_90_210_mask_d", "--power", "5"], "\"5 W\""),
        (
            &["fcc_90_210_mask_b", "--authorized-bandwidth", "0 Hz"],
            "\"20 kHz\"",
        ),
    ] {
        let output = limits(arguments);
        let message = String::from_utf8(output.stderr).unwrap();
        assert_eq!(output.status.code(), Some(2), "{message}");
        assert!(message.contains(advice), "{message}");
    }
}
