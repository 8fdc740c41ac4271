//! Tables in front of schemes that keep a law of their own.

use std::f64::consts::PI;

use num_complex::Complex64;
use quietedge::drive::{Between, LookupSize, Scheme, Shape, Shaping};
use quietedge::map::{Control, Map, MapPoint, Origin};
use quietedge::predistort::{EntryState, Table, TableRequest};
use quietedge::signal;
use quietedge::study::{CheckResult, PredistortRequest, Study, check, predistort};

use super::Memory;

/// The invented stage and signal of the tide gauge beside `scheme` and `predistort`.
fn files(scheme: &str, predistort: &str) -> Memory {
    let mut files = Memory::default();
    for name in ["tide-gauge.stage.toml", "tide-gauge.wav"] {
        let path = format!("{}/signals/{name}", env!("CARGO_MANIFEST_DIR"));
        let bytes = std::fs::read(&path).expect(&path);
        files.0.insert(name.to_owned(), bytes);
    }
    let text = format!(
        "stage = \"tide-gauge.stage.toml\"\n[signal]\nfile = \"tide-gauge.wav\"\nlevel = 0.95\n\
         [scheme]\n{scheme}\n{predistort}\n[limits]\nchannel = \"12.5 kHz\"\nevm_percent = 1\n"
    );
    files.0.insert("study.toml".to_owned(), text.into_bytes());
    files
}

fn carry_out(scheme: &str, predistort: &str) -> CheckResult {
    let files = files(scheme, predistort);
    let study = Study::read("study.toml", &files).unwrap_or_else(|problem| panic!("{problem}"));
    let signal = &study.signal;
    let mut source = signal::open(&files, &signal.file, &signal.options).expect("the signal");
    check(&study, &mut *source, &mut |_| {}).unwrap_or_else(|error| panic!("{error}"))
}

fn worst_acpr_db(result: &CheckResult) -> f64 {
    let pair = result.metrics.acpr[0];
    pair.lower_db.max(pair.upper_db)
}

const FINE: &str =
    "[predistort]\ndepth = 4096\naddress_bits = 18\namplitude_bits = 16\nphase_bits = 16";

/// A law that knows nothing of the stage, behind a table of 16 bits, gives what the inverse law gives.
///
/// Tolerances: a table of 16 bits rounds to 2^-16 / sqrt(12) of full output, 4.4e-6; against an RMS of some
/// 0.65 that is 0.0007 % in the whole band of the table's clock. 4096 entries on straight lines bend by less, but where the
/// output is held at the narrowest pulse. 0.01 points of EVM and 0.5 dB of ACPR cover both.
#[test]
fn a_table_restores_what_the_inverse_law_gives() {
    for (kind, law, ideal) in [
        ("kind = \"width\"", "sine", "inverse"),
        ("kind = \"width\"", "amplitude", "inverse"),
        (
            "kind = \"outphase\"\ncombining = \"joined\"",
            "cosine",
            "inverse",
        ),
    ] {
        let with = |law: &str| format!("{kind}\nlaw = \"{law}\"");
        let plain = carry_out(&with(law), "");
        let inverse = carry_out(&with(ideal), "");
        let table = carry_out(&with(law), FINE);
        let evm = |result: &CheckResult| result.metrics.evm_percent;
        println!(
            "{kind} {law}: EVM {:.4} %, behind the table {:.4} %, inverse law {:.4} %; ACPR {:.2}, {:.2}, {:.2} dB",
            evm(&plain),
            evm(&table),
            evm(&inverse),
            worst_acpr_db(&plain),
            worst_acpr_db(&table),
            worst_acpr_db(&inverse)
        );
        assert!(evm(&plain) > 1.0);
        assert!((evm(&table) - evm(&inverse)).abs() < 0.01);
        assert!((worst_acpr_db(&table) - worst_acpr_db(&inverse)).abs() < 0.5);
        let made = table.table.expect("a table");
        assert_eq!((made.control, made.full_control), (Control::Drive, 1.0));
    }
}

/// `V = 20 s^1.5 exp(j 1.2 d)`, `s = sin(pi d)`, width `d` to 0.5.
fn width_map() -> Map {
    let points = (0..=4000).map(|at| {
        let width = 0.5 * f64::from(at) / 4000.0;
        MapPoint {
            control: width,
            output_v: Complex64::from_polar(20.0 * (PI * width).sin().powf(1.5), 1.2 * width),
            supply_v: 6.0,
            supply_a: None,
            driver_w: None,
            efficiency: None,
            switch_peak_v: None,
            switch_peak_a: None,
            switch_min_v: None,
            closing_v: None,
        }
    });
    Map::new(Control::Width, Origin::File, 1e8, 50.0, points.collect()).expect("a map")
}

/// The sine law makes `s` of the magnitude it is given: the table must give it `m^(2/3)`, and undo the phase of the width
/// `asin(m^(2/3)) / pi`.
#[test]
fn entries_in_front_of_the_sine_law_are_the_closed_form() {
    let files = files("kind = \"width\"\nlaw = \"sine\"", "");
    let study = Study::read("study.toml", &files).unwrap_or_else(|problem| panic!("{problem}"));
    let Scheme::Width(_) = &study.scheme else {
        panic!("another scheme");
    };
    let behind = study.scheme.forward(&width_map()).expect("a map");
    let request = TableRequest {
        size: LookupSize {
            depth: 513,
            address_bits: 16,
            amplitude_bits: 16,
            phase_bits: 16,
        },
        between: Between::Linear,
        ..TableRequest::default()
    };
    let shaping = Shaping {
        shape: Shape::Corner,
        floor: 0.0,
    };
    let table = Table::from_map("closed", &behind, 1.0, &shaping, &request).expect("a table");
    let (mut control, mut phase) = (0.0f64, 0.0f64);
    for entry in table.entries.iter().skip(1) {
        let given = entry.magnitude.powf(2.0 / 3.0);
        let turned = -1.2 * (given.min(1.0).asin() / PI - 0.5);
        control = control.max((entry.control - given).abs());
        phase = phase.max((entry.phase_rad - turned).abs());
        assert_eq!(entry.state, EntryState::Inverted, "{}", entry.magnitude);
    }
    println!("off by {control:.1e} of full magnitude and {phase:.1e} rad");
    // Cubics through 4001 and 4097 points of smooth curves; a step of 16 bits is 1.5e-5 and 9.6e-5 rad.
    assert!(control < 1e-8 && phase < 1e-8, "{control} {phase}");
}

#[test]
fn schemes_that_leave_nothing_to_undo_say_so() {
    for (scheme, said) in [
        (
            "kind = \"width\"",
            "nothing to undo: law = \"inverse\" already",
        ),
        (
            "kind = \"outphase\"\ncombining = \"joined\"",
            "nothing to undo: law = \"inverse\" already",
        ),
        (
            "kind = \"outphase\"\ncombining = \"isolated\"",
            "there is nothing to undo",
        ),
        ("kind = \"class_b\"", "there is nothing to undo"),
        (
            "kind = \"levels\"\ncount = 3\nlaw = \"sine\"",
            "rails change",
        ),
        (
            "kind = \"burst\"\nrate = \"1 MHz\"",
            "into pulses of full output",
        ),
    ] {
        let asked = Study::read("study.toml", &files(scheme, FINE)).expect_err("refused");
        assert!(asked.to_string().contains(said), "{scheme}: {asked}");
        let files = files(scheme, "");
        let study = Study::read("study.toml", &files).unwrap_or_else(|problem| panic!("{problem}"));
        let request = PredistortRequest {
            table: TableRequest::default(),
            search: None,
            polynomial: None,
        };
        let signal = &study.signal;
        let mut source = signal::open(&files, &signal.file, &signal.options).expect("the signal");
        let error = predistort(&study, &request, &mut *source, &mut |_| {}).expect_err("refused");
        assert!(error.to_string().contains(said), "{scheme}: {error}");
    }
}
