//! Rows with margins known by hand.

use super::*;
use crate::limits::AcprLimit;
use crate::metrics::ChannelFilter;
use crate::units::db;

/// 18 kHz root-raised-cosine channels: `main_dbm` in the wanted one, `next_dbm` in the one above.
fn tetra(main_dbm: f64, next_dbm: f64, class: Option<&str>) -> Judgement {
    let fine = spectrum(16_384, 12.5, 18.75, |hz| {
        if hz.abs() < 12.15e3 {
            watt_from_dbm(main_dbm) / 18e3
        } else if (hz - 25e3).abs() < 12.15e3 {
            watt_from_dbm(next_dbm) / 18e3
        } else {
            1e-20
        }
    });
    let limits = Limits {
        classes: class.map(str::to_owned).into_iter().collect(),
        ..limits(&["tetra_acp_below_700mhz"])
    };
    judge(&measured(&fine, &[], watt_from_dbm(main_dbm)), &limits)
}

#[test]
fn neighbours_by_class_and_floor() {
    // -57 dB: class 4 allows -55, the others ask for -60.
    let loose = tetra(30.0, -27.0, Some("class_4"));
    // The sum over bins of 12.5 Hz stands for the integral of the filter.
    near(loose.verdict.checks[0].margin_db.unwrap(), 2.0, 1e-3);
    let strict = tetra(30.0, -27.0, Some("other"));
    near(strict.verdict.checks[0].margin_db.unwrap(), -3.0, 1e-3);
    assert_eq!(strict.verdict.outcome, Outcome::Outside);
    let unstated = tetra(30.0, -27.0, None);
    assert_eq!(
        unstated.verdict.checks[0].margin_db,
        strict.verdict.checks[0].margin_db
    );
    assert!(unstated.verdict.checks[0].reason.contains("strictest row"));
    // 10 dBm: -50 dBm would be asked for, but nothing tighter than -36 dBm is.
    let floor = tetra(10.0, -38.0, Some("other"));
    near(floor.verdict.checks[0].margin_db.unwrap(), 2.0, 1e-3);
    assert!(
        floor.verdict.checks[0]
            .reason
            .contains("raised to -36.00 dBm")
    );
    assert_eq!(floor.acpr.len(), 3);
    near(floor.acpr[0].upper_db, -48.0, 1e-3);
    assert!(floor.warnings[0].contains("memory"));
}

#[test]
fn rows_by_power_and_the_term_beyond() {
    // 0.5 W: -55 dB at 25 kHz; 2 W: -60 dB. -58 dB is there.
    for (mean_w, margin_db) in [(0.5, 3.0), (2.0, -2.0)] {
        let fine = spectrum(16_384, 25.0, 37.5, |hz| {
            if hz.abs() <= 10e3 {
                mean_w / 20_025.0
            } else if (hz - 25e3).abs() <= 9.1e3 {
                mean_w * 10f64.powf(-5.8) / 18e3
            } else {
                1e-18
            }
        });
        let judgement = judge(
            &measured(&fine, &[], mean_w),
            &limits(&["fcc_90_221_acp_450"]),
        );
        let check = &judgement.verdict.checks[0];
        near(check.margin_db.unwrap(), margin_db, 1e-6);
        // Three rows and the term beyond 75 kHz: -13 dBm against 1e-18 W/Hz in 18 kHz.
        assert_eq!(judgement.verdict.checks.len(), 4);
        let beyond = margin(&judgement, 75e3, Side::Upper);
        near(beyond.limit_db + beyond.reference_dbm.unwrap(), -13.0, 1e-6);
        near(beyond.margin_db, -13.0 - (db(1.8e-14) + 30.0), 1e-6);
    }
}

#[test]
fn error_vectors_and_what_was_not_measured() {
    let fine = spectrum(64, 1.0, 1.5, |_| 1.0);
    let mut output = measured(&fine, &[], 64.0);
    let asked = Limits {
        evm_percent: Some(10.0),
        evm_peak_percent: Some(30.0),
        ..Limits::default()
    };
    output.evm_percent = Some(5.0);
    let judgement = judge(&output, &asked);
    near(
        judgement.verdict.checks[0].margin_db.unwrap(),
        6.020_599_913,
        1e-9,
    );
    assert_eq!(judgement.verdict.checks[1].outcome, Outcome::Undecided);
    assert_eq!(judgement.verdict.outcome, Outcome::Undecided);
    output.evm_peak_percent = Some(31.0);
    assert_eq!(judge(&output, &asked).verdict.outcome, Outcome::Outside);
    // An unmeasured peak does not hide an RMS that is outside.
    output.evm_peak_percent = None;
    output.evm_percent = Some(11.0);
    assert_eq!(judge(&output, &asked).verdict.outcome, Outcome::Outside);
    // -22 and -25 dB for 64-QAM: without the code rate the strictest.
    output.modulation = Some("64QAM");
    output.evm_percent = Some(10.0);
    let judgement = judge(&output, &limits(&["ieee80211_ofdm_rce"]));
    near(judgement.verdict.checks[0].margin_db.unwrap(), -5.0, 1e-9);
    assert!(judgement.verdict.checks[0].reason.contains("64-QAM 3/4"));
    assert!(judgement.verdict.checks[0].reason.contains("second-hand"));
}

#[test]
fn harmonics_against_cap_and_floor() {
    let fine = spectrum(64, 1.0, 1.5, |_| 10.0 / 64.0);
    let mut output = measured(&fine, &[], 10.0);
    let harmonics = [-65.0, -55.0];
    output.harmonics_dbc = Some(&harmonics);
    // 10 W: -40 dB, but 25 uW (-16.02 dBm) at most: -56.02 dB.
    let judgement = judge(&output, &limits(&["fcc_97_307_30_225mhz"]));
    near(
        judgement.verdict.checks[0].margin_db.unwrap(),
        -1.020_599_913,
        1e-9,
    );
    assert!(judgement.verdict.checks[0].reason.contains("harmonic 3"));
    output.harmonics_dbc = None;
    let judgement = judge(&output, &limits(&["fcc_97_307_30_225mhz"]));
    assert_eq!(judgement.verdict.outcome, Outcome::Undecided);
}

#[test]
fn stated_ratios_are_held_to_the_same_filter() {
    let fine = spectrum(
        4096,
        10.0,
        15.0,
        |hz| {
            if hz.abs() < 5e3 { 1.0 } else { 1e-5 }
        },
    );
    let asked = Limits {
        acpr: vec![
            AcprLimit {
                offset_hz: 12.5e3,
                filter: ChannelFilter::Flat { bandwidth_hz: 9e3 },
                main: ChannelFilter::Flat { bandwidth_hz: 9e3 },
                limit_db: -48.0,
            },
            AcprLimit {
                offset_hz: 30e3,
                filter: ChannelFilter::Flat { bandwidth_hz: 9e3 },
                main: ChannelFilter::Flat { bandwidth_hz: 9e3 },
                limit_db: -48.0,
            },
        ],
        ..Limits::default()
    };
    let judgement = judge(&measured(&fine, &[], 1e4), &asked);
    near(judgement.verdict.checks[0].margin_db.unwrap(), 2.0, 1e-9);
    // 20.48 kHz were sampled to a side.
    assert_eq!(judgement.verdict.checks[1].outcome, Outcome::Undecided);
    assert!(
        judgement.verdict.checks[1]
            .reason
            .contains("raise the sample rate")
    );
}

#[test]
fn stress_against_ratings() {
    let fine = spectrum(1000, 50.0, 100.0, |_| 1e-9);
    let limits = Limits {
        peak_voltage_v: Some(40.0),
        peak_current_a: Some(2.0),
        ..Limits::default()
    };
    let mut measured = measured(&fine, &[], 1.0);
    let unknown = judge(&measured, &limits);
    assert_eq!(unknown.verdict.outcome, Outcome::Undecided);
    assert_eq!(unknown.verdict.checks.len(), 2);
    measured.stress = Some(Stress {
        peak_v: 20.0,
        peak_a: 4.0,
    });
    let judged = judge(&measured, &limits);
    assert_eq!(judged.verdict.outcome, Outcome::Outside);
    // 20 log10(40/20) and 20 log10(2/4).
    near(
        judged.verdict.checks[0].margin_db.unwrap(),
        6.020_599_913,
        1e-8,
    );
    near(
        judged.verdict.checks[1].margin_db.unwrap(),
        -6.020_599_913,
        1e-8,
    );
}
