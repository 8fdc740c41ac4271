//! `quietedge signal` from the outside: files, JSON, exit codes, and never over others unasked.

use std::path::Path;
use std::process::{Command, Output};

fn run(folder: &Path, arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_quietedge"))
        .arg("signal")
        .args(arguments)
        .current_dir(folder)
        .output()
        .unwrap()
}

fn json(output: &Output) -> serde_json::Value {
    assert!(output.status.success(), "{output:?}");
    serde_json::from_slice(&output.stdout).unwrap()
}

#[test]
fn every_kind_is_written_in_every_format_and_shown_again() {
    let folder = tempfile::tempdir().unwrap();
    let kinds: [&[&str]; 6] = [
        &[
            "single-carrier",
            "--symbol-rate",
            "4.8kHz",
            "--symbols",
            "50",
        ],
        &[
            "ofdm",
            "--spacing",
            "15 kHz",
            "--fft",
            "64",
            "--carriers",
            "52",
            "--prefix",
            "8",
            "--symbols",
            "3",
        ],
        &[
            "two-tone",
            "--spacing",
            "1kHz",
            "--rate",
            "64kHz",
            "--samples",
            "640",
            "--periodic",
        ],
        &[
            "multitone",
            "--tones",
            "5",
            "--spacing",
            "1kHz",
            "--rate",
            "64kHz",
            "--samples",
            "640",
        ],
        &[
            "noise",
            "--bandwidth",
            "10 kHz",
            "--rate",
            "64kHz",
            "--samples",
            "640",
        ],
        &[
            "ramp",
            "--rate",
            "1MHz",
            "--samples",
            "100",
            "--from",
            "10 %",
        ],
    ];
    for kind in kinds {
        for file in ["x.wav", "x.csv", "x.cf32", "x.ci16", "x.npy"] {
            let arguments = [kind, &["--out", file, "--force", "--json", "--peak", "0.5"]].concat();
            let made = json(&run(folder.path(), &arguments));
            assert_eq!(made["seed"], 1);
            assert_eq!(made["file"], file);
            assert!((made["peak"].as_f64().unwrap() - 0.5).abs() < 1e-12);
            let shown = json(&run(folder.path(), &["show", file, "--json"]));
            for key in ["rate_hz", "samples", "duration_s"] {
                assert_eq!(made[key], shown[key], "{kind:?} {file} {key}");
            }
            // 16-bit codes: a relative error of a part in 2^15 of the peak at most, 0.001 dB with room.
            let papr = |value: &serde_json::Value| value["papr_db"].as_f64().unwrap();
            assert!((papr(&made) - papr(&shown)).abs() < 1e-3, "{made} {shown}");
        }
    }
}

#[test]
fn the_same_seed_gives_the_same_bytes_and_nothing_is_overwritten() {
    let folder = tempfile::tempdir().unwrap();
    let make = |file: &str, seed: &str| {
        run(
            folder.path(),
            &[
                "noise",
                "--bandwidth",
                "1MHz",
                "--rate",
                "4MHz",
                "--samples",
                "500",
                "--seed",
                seed,
                "--out",
                file,
            ],
        )
    };
    let bytes = |file: &str| std::fs::read(folder.path().join(file)).unwrap();
    assert!(make("a.cf32", "7").status.success());
    assert!(make("b.cf32", "7").status.success());
    assert!(make("c.cf32", "8").status.success());
    assert_eq!(bytes("a.cf32"), bytes("b.cf32"));
    assert_ne!(bytes("a.cf32"), bytes("c.cf32"));
    assert_eq!(
        String::from_utf8(bytes("a.cf32.toml")).unwrap(),
        "rate = 4000000.0  # Hz\n"
    );

    let before = bytes("a.cf32");
    let refused = make("a.cf32", "8");
    assert_eq!(refused.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&refused.stderr).contains("--force"));
    assert_eq!(bytes("a.cf32"), before);
    // A sidecar alone is not overwritten either.
    std::fs::write(folder.path().join("d.cf32.toml"), "rate = 1").unwrap();
    assert_eq!(make("d.cf32", "1").status.code(), Some(2));
    assert!(!folder.path().join("d.cf32").exists());
}

#[test]
fn what_cannot_be_done_ends_with_code_2_and_a_reason() {
    let folder = tempfile::tempdir().unwrap();
    std::fs::write(folder.path().join("odd.cf32"), [0; 9]).unwrap();
    for (arguments, phrase) in [
        (
            &["show", "odd.cf32", "--rate", "1MHz"][..],
            "a multiple of 8",
        ),
        (&["show", "missing.wav"], "missing.wav"),
        (&["ramp", "--rate", "1MHz", "--out", "x.mp3"], ".cf32"),
        (&["ramp", "--rate", "1 V", "--out", "x.wav"], "169.4 MHz"),
        (
            &["ramp", "--rate", "1MHz", "--peak", "2", "--out", "x.wav"],
            "peak: given 2",
        ),
        (
            &["ramp", "--rate", "0.5 Hz", "--out", "x.wav"],
            "whole numbers of Hz",
        ),
        (
            &[
                "ramp",
                "--rate",
                "1MHz",
                "--numbers",
                "float64",
                "--out",
                "x.wav",
            ],
            "--numbers",
        ),
    ] {
        let output = run(folder.path(), arguments);
        assert_eq!(output.status.code(), Some(2), "{arguments:?}");
        assert!(output.stdout.is_empty());
        let message = String::from_utf8_lossy(&output.stderr).into_owned();
        assert!(message.contains(phrase), "{arguments:?}: {message}");
    }
    // Nothing half-made stays behind.
    let names: Vec<_> = std::fs::read_dir(folder.path())
        .unwrap()
        .map(|entry| entry.unwrap().file_name())
        .collect();
    assert_eq!(names, ["odd.cf32"]);
}
