//! The command line from outside: exit codes, what goes where, files written whole, help.

use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};

use serde_json::Value;
use tempfile::TempDir;

fn program(folder: &Path) -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_quietedge"));
    command.current_dir(folder);
    command
}

fn run(folder: &Path, arguments: &[&str]) -> Output {
    program(folder).args(arguments).output().unwrap()
}

fn stdout(output: &Output) -> String {
    String::from_utf8(output.stdout.clone()).unwrap()
}

fn stderr(output: &Output) -> String {
    String::from_utf8(output.stderr.clone()).unwrap()
}

fn signals() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("signals")
}

/// A folder with the demo stage, a short signal and studies that are quickly carried out.
fn bench() -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    std::fs::copy(
        signals().join("tide-gauge.stage.toml"),
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
            "600",
            "--out",
            "signal.wav",
        ],
    );
    assert!(made.status.success(), "{}", stderr(&made));
    study(folder.path(), "within.toml", "evm_percent = 50");
    study(folder.path(), "outside.toml", "evm_percent = 0.01");
    folder
}

/// A study with an unaligned path, so that there is an error vector.
fn study(folder: &Path, name: &str, limits: &str) {
    let text = format!(
        "title = \"Short\"\nstage = \"stage.toml\"\n[signal]\nfile = \"signal.wav\"\nlevel = 0.9\n\
         [scheme]\nkind = \"supply\"\nmodulator = {{ bandwidth = \"20 kHz\", order = 2 }}\n[limits]\n{limits}\n"
    );
    std::fs::write(folder.join(name), text).unwrap();
}

/// Names of all that stands in `folder`, hidden files included.
fn listing(folder: &Path) -> Vec<String> {
    let mut names: Vec<String> = std::fs::read_dir(folder)
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .collect();
    names.sort();
    names
}

fn has_keys(value: &Value, path: &str, keys: &[&str]) {
    for key in keys {
        assert!(value.get(key).is_some(), "no {path}.{key} in {value:#}");
    }
}

#[test]
fn exit_codes_tell_the_verdict() {
    let folder = bench();
    let within = run(folder.path(), &["check", "within.toml"]);
    assert_eq!(within.status.code(), Some(0), "{}", stderr(&within));
    assert!(stdout(&within).starts_with("WITHIN: Short"));

    let outside = run(folder.path(), &["check", "outside.toml"]);
    assert_eq!(outside.status.code(), Some(1), "{}", stderr(&outside));
    assert!(stdout(&outside).starts_with("OUTSIDE: Short"));

    study(folder.path(), "nothing.toml", "");
    let undecided = run(folder.path(), &["check", "nothing.toml"]);
    assert_eq!(undecided.status.code(), Some(2));
    assert!(
        stderr(&undecided).starts_with("quietedge: undecided"),
        "{}",
        stderr(&undecided)
    );

    for wrong in [
        &["check", "missing.toml"][..],
        &["solve", "missing.toml"],
        &["map", "missing.toml"],
        &["signal", "show", "missing.wav"],
        &["limits", "missing"],
        &["no-such-command"],
        &["check", "--no-such-option"],
        &["solve", "stage.toml", "--supply", "3 ohm"],
        &["solve", "stage.toml", "--duty", "1"],
        &["solve", "stage.toml", "--frequency", "0 Hz"],
        &["solve", "stage.toml", "--load-resistance", "1e300"],
        &["map", "stage.toml", "--points", "1"],
        &["map", "stage.toml", "--from", "5", "--to", "2"],
        &["map", "stage.toml", "--control", "width", "--to", "1.5"],
    ] {
        let output = run(folder.path(), wrong);
        assert_eq!(output.status.code(), Some(2), "{wrong:?}");
        assert!(output.stdout.is_empty(), "{wrong:?}: {}", stdout(&output));
        assert!(!output.stderr.is_empty(), "{wrong:?}");
    }
}

#[test]
fn json_is_one_document_with_the_promised_keys() {
    let folder = bench();
    let document = |arguments: &[&str]| -> Value {
        let output = run(folder.path(), arguments);
        serde_json::from_slice(&output.stdout)
            .unwrap_or_else(|error| panic!("{arguments:?}: {error}: {}", stdout(&output)))
    };
    let solve = document(&["solve", "stage.toml", "--json"]);
    has_keys(
        &solve,
        "",
        &["stage", "frequency_hz", "supply_v", "duty", "orbit"],
    );
    let orbit_keys = [
        "output_v",
        "output_w",
        "supply_a",
        "supply_w",
        "driver_w",
        "efficiency",
        "losses_w",
        "switch_peak_v",
        "switch_peak_a",
        "closing_v",
        "closing_slope_v_per_s",
        "harmonics_dbc",
        "energy_residual",
    ];
    has_keys(&solve["orbit"], "orbit", &orbit_keys);
    has_keys(&solve["orbit"]["output_v"], "orbit.output_v", &["re", "im"]);
    assert!(solve["orbit"]["harmonics_dbc"].as_array().unwrap().len() >= 2);

    let map = document(&["map", "stage.toml", "--points", "3", "--json"]);
    assert_eq!(map["points"].as_array().unwrap().len(), 3);
    let point_keys = [
        "control",
        "output_v",
        "supply_a",
        "efficiency",
        "switch_peak_v",
        "closing_v",
    ];
    has_keys(&map["points"][2], "points", &point_keys);

    study(
        folder.path(),
        "all.toml",
        "sets = [\"fcc_90_210_mask_d\"]\nchannel = \"12.5 kHz\"\nevm_percent = 10\n\
         acpr = [{ offset = \"12.5 kHz\", bandwidth = \"8 kHz\", limit = \"-20 dB\" }]",
    );
    let check = document(&["check", "all.toml", "--json"]);
    has_keys(&check, "", &["metrics", "verdict", "warnings"]);
    let metric_keys = [
        "power_dbm",
        "papr_db",
        "occupied_hz",
        "evm_percent",
        "evm_peak_percent",
        "nmse_db",
        "acpr",
        "mask",
        "efficiency",
    ];
    has_keys(&check["metrics"], "metrics", &metric_keys);
    let acpr_keys = ["offset_hz", "bandwidth_hz", "lower_db", "upper_db"];
    has_keys(&check["metrics"]["acpr"][0], "metrics.acpr", &acpr_keys);
    let mask_keys = ["from_hz", "to_hz", "side", "margin_db", "worst_hz"];
    has_keys(&check["metrics"]["mask"][0], "metrics.mask", &mask_keys);
    let outcome = check["verdict"]["outcome"].as_str().unwrap();
    assert!(
        ["within", "outside", "undecided"].contains(&outcome),
        "{outcome}"
    );
    let check_keys = ["name", "outcome", "margin_db", "reason"];
    has_keys(
        &check["verdict"]["checks"][0],
        "verdict.checks",
        &check_keys,
    );
    assert!(check["warnings"].is_array());

    for arguments in [
        &["limits", "--json"][..],
        &["limits", "fcc_90_210_mask_d", "--json"],
        &["signal", "show", "signal.wav", "--json"],
        &["--json", "solve", "stage.toml"],
    ] {
        assert!(document(arguments).is_object(), "{arguments:?}");
    }
    assert!(
        document(&["limits", "--json"])["sets"]
            .as_array()
            .unwrap()
            .len()
            > 5
    );
}

#[test]
fn the_same_study_gives_the_same_bytes() {
    let folder = bench();
    let once = run(folder.path(), &["check", "within.toml", "--json"]);
    let again = run(folder.path(), &["check", "within.toml", "--json"]);
    assert!(once.stdout.len() > 1000);
    assert_eq!(once.stdout, again.stdout);
}

#[test]
fn files_are_never_overwritten_unasked_and_nothing_else_stays() {
    let folder = bench();
    let commands: [(&[&str], &[&str]); 3] = [
        (
            &["solve", "stage.toml"],
            &["orbit.json", "waveform.png", "waveform.svg"],
        ),
        (
            &["map", "stage.toml", "--points", "5"],
            &["map.csv", "map.json", "map.png", "map.svg"],
        ),
        (
            &["check", "within.toml"],
            &["map.csv", "report.html", "result.json", "spectrum.png"],
        ),
    ];
    for (arguments, files) in commands {
        let out = folder.path().join(format!("out-{}", arguments[0]));
        let with = |more: &[&str]| {
            let mut words = arguments.to_vec();
            words.extend(["--out", out.to_str().unwrap()]);
            words.extend(more);
            run(folder.path(), &words)
        };
        let first = with(&[]);
        assert_eq!(first.status.code(), Some(0), "{}", stderr(&first));
        assert_eq!(listing(&out), files);

        std::fs::write(out.join(files[0]), "mine").unwrap();
        let refused = with(&[]);
        assert_eq!(refused.status.code(), Some(2));
        assert!(refused.stdout.is_empty());
        assert!(stderr(&refused).contains("--force"), "{}", stderr(&refused));
        assert_eq!(std::fs::read_to_string(out.join(files[0])).unwrap(), "mine");
        assert_eq!(listing(&out), files);

        assert_eq!(with(&["--force"]).status.code(), Some(0));
        assert_ne!(std::fs::read_to_string(out.join(files[0])).unwrap(), "mine");
        assert_eq!(listing(&out), files);
    }

    // A command that fails writes nothing.
    let out = folder.path().join("out-failed");
    let failed = run(
        folder.path(),
        &["solve", "missing.toml", "--out", out.to_str().unwrap()],
    );
    assert_eq!(failed.status.code(), Some(2));
    assert!(!out.exists() || listing(&out).is_empty());
    // A folder that is a file is refused before the work.
    let refused = run(
        folder.path(),
        &["solve", "stage.toml", "--out", "stage.toml"],
    );
    assert_eq!(refused.status.code(), Some(2));
    assert!(
        stderr(&refused).contains("stage.toml"),
        "{}",
        stderr(&refused)
    );
}

#[test]
fn quiet_leaves_only_errors_on_stderr() {
    let folder = bench();
    let spoken = run(folder.path(), &["solve", "stage.toml", "--out", "a"]);
    assert!(stderr(&spoken).contains("wrote"));
    let quiet = run(folder.path(), &["-q", "solve", "stage.toml", "--out", "b"]);
    assert_eq!(stderr(&quiet), "");
    assert_eq!(quiet.stdout, spoken.stdout);
    let wrong = run(folder.path(), &["-q", "solve", "missing.toml"]);
    assert!(stderr(&wrong).contains("missing.toml"));
}

#[test]
fn a_reader_that_stops_early_is_no_failure() {
    let folder = bench();
    for arguments in [
        &["limits"][..],
        &["map", "stage.toml", "--points", "20001", "--json"],
    ] {
        let mut child = program(folder.path())
            .args(arguments)
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap();
        drop(child.stdout.take());
        let output = child.wait_with_output().unwrap();
        assert_eq!(
            output.status.code(),
            Some(0),
            "{arguments:?}: {}",
            stderr(&output)
        );
        assert_eq!(stderr(&output), "");
    }
}

#[test]
fn every_command_has_help_that_ends_with_examples_and_the_common_options_stand_apart() {
    let folder = tempfile::tempdir().unwrap();
    let top = run(folder.path(), &["--help"]);
    assert_eq!(top.status.code(), Some(0));
    let text = stdout(&top);
    let commands: Vec<&str> = text
        .lines()
        .skip_while(|line| !line.starts_with("Commands:"))
        .skip(1)
        .take_while(|line| !line.is_empty())
        .filter(|line| line.starts_with("  ") && !line.starts_with("   "))
        .filter_map(|line| line.split_whitespace().next())
        .filter(|name| *name != "help")
        .collect();
    for needed in ["check", "solve", "map", "signal", "limits", "completions"] {
        assert!(
            commands.contains(&needed),
            "{needed} is not in {commands:?}"
        );
    }
    for command in commands {
        let help = run(folder.path(), &[command, "--help"]);
        assert_eq!(help.status.code(), Some(0));
        let text = stdout(&help);
        if command != "signal" {
            let examples = text.split("Examples:").nth(1);
            let examples = examples.unwrap_or_else(|| panic!("{command} has no examples"));
            assert!(examples.contains(&format!("quietedge {command}")), "{text}");
        }
        let (own, common) = text
            .split_once("For every command:")
            .unwrap_or_else(|| panic!("{command}: the common options have no heading"));
        assert!(common.contains("--json") && common.contains("--quiet"));
        assert!(!own.contains("--json "), "{text}");
        for line in text.lines() {
            assert!(line.chars().count() <= 100, "{command}: {line}");
        }
    }
    assert!(stdout(&run(folder.path(), &["--version"])).starts_with("quietedge "));
}

#[test]
fn completions_know_the_commands() {
    let folder = tempfile::tempdir().unwrap();
    for shell in ["bash", "zsh", "fish", "elvish", "powershell"] {
        let output = run(folder.path(), &["completions", shell]);
        assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
        let script = stdout(&output);
        for word in ["check", "solve", "limits", "completions", "load-resistance"] {
            assert!(script.contains(word), "{shell} does not know {word}");
        }
    }
    assert_eq!(
        run(folder.path(), &["completions", "bash", "--json"])
            .status
            .code(),
        Some(2)
    );
    assert_eq!(
        run(folder.path(), &["completions", "cat"]).status.code(),
        Some(2)
    );
}

#[test]
fn names_with_spaces_and_other_scripts_work_from_any_folder() {
    let folder = bench();
    let odd = folder.path().join("Pegel Ä 潮位 study");
    std::fs::create_dir(&odd).unwrap();
    for (from, to) in [
        ("stage.toml", "Stufe ä.toml"),
        ("signal.wav", "señal 1.wav"),
        ("within.toml", "prüfung №1.toml"),
    ] {
        std::fs::copy(folder.path().join(from), odd.join(to)).unwrap();
    }
    let path = odd.join("prüfung №1.toml");
    let text = std::fs::read_to_string(&path).unwrap();
    let text = text
        .replace("stage.toml", "Stufe ä.toml")
        .replace("signal.wav", "señal 1.wav");
    std::fs::write(&path, text).unwrap();
    // Names in a study are relative to the study, wherever the program runs.
    let elsewhere = tempfile::tempdir().unwrap();
    let output = run(
        elsewhere.path(),
        &["check", path.to_str().unwrap(), "--out", "bericht ß"],
    );
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    assert_eq!(listing(elsewhere.path()), ["bericht ß"]);
    let report = std::fs::read_to_string(elsewhere.path().join("bericht ß/report.html")).unwrap();
    assert!(report.contains("prüfung №1.toml"));
    // Without --out a named study writes nothing.
    let output = run(&odd, &["check", "prüfung №1.toml"]);
    assert_eq!(output.status.code(), Some(0));
    assert_eq!(listing(&odd).len(), 3);
}

#[test]
fn the_built_in_study_works_in_an_empty_folder_and_again() {
    let folder = tempfile::tempdir().unwrap();
    let output = run(folder.path(), &["check"]);
    let code = output.status.code();
    assert!(matches!(code, Some(0 | 1)), "{}", stderr(&output));
    assert_eq!(listing(folder.path()), ["quietedge-report"]);
    let files = listing(&folder.path().join("quietedge-report"));
    assert_eq!(
        files,
        ["map.csv", "report.html", "result.json", "spectrum.png"]
    );

    // The report is made anew, and its block in the README is what is printed.
    let again = run(folder.path(), &["check"]);
    assert_eq!(again.status.code(), code);
    assert_eq!(listing(folder.path()), ["quietedge-report"]);
    let readme = Path::new(env!("CARGO_MANIFEST_DIR")).join("README.md");
    let readme = std::fs::read_to_string(readme).unwrap();
    let block = readme
        .split("<!-- output of `quietedge check` -->\n```text\n")
        .nth(1)
        .and_then(|rest| rest.split("\n```\n").next())
        .expect("the marked block of README.md");
    assert_eq!(
        block.trim_end(),
        stdout(&output).trim_end(),
        "README.md is out of date"
    );
}
