//! Verdicts as a whole, and what they ask for.

use super::*;
use crate::limits::Kind;

#[test]
fn nothing_asked_and_nothing_sent_are_undecided() {
    let fine = spectrum(64, 1.0, 1.5, |_| 1.0);
    let judgement = judge(&measured(&fine, &[], 64.0), &Limits::default());
    assert_eq!(judgement.verdict.outcome, Outcome::Undecided);
    assert!(
        judgement.verdict.checks[0]
            .reason
            .contains("no limit was named")
    );
    let judgement = judge(&measured(&fine, &[], 64.0), &limits(&["tetra_signal"]));
    assert_eq!(judgement.verdict.outcome, Outcome::Undecided);
    for mean_w in [0.0, f64::NAN] {
        let judgement = judge(
            &measured(&fine, &[], mean_w),
            &limits(&["fcc_90_210_mask_h"]),
        );
        assert_eq!(judgement.verdict.outcome, Outcome::Undecided);
        assert!(judgement.verdict.checks[0].reason.contains("no power"));
    }
    let hole = spectrum(64, 1.0, 1.5, |hz| if hz == 3.0 { f64::NAN } else { 1.0 });
    let judgement = judge(&measured(&hole, &[], 64.0), &limits(&["fcc_90_210_mask_h"]));
    assert_eq!(judgement.verdict.outcome, Outcome::Undecided);
}

#[test]
fn wanted_spectra() {
    let wanted = Wanted::of(&limits(&["fcc_90_210_mask_d", "fcc_90_210_mask_e"]));
    assert_eq!(wanted.peak_hold_resolutions_hz, [100.0]);
    assert_eq!(wanted.fine_resolution_hz, Some(100.0));
    // Mask D: the first 100 kHz beyond 55.625 kHz end at 155.625 kHz.
    assert!(
        wanted.span_hz > 2.0 * 155.625e3 && wanted.span_hz < 600e3,
        "{wanted:?}"
    );
    let asked = Limits {
        authorized_bandwidth_hz: Some(20e3),
        ..limits(&["fcc_90_210_mask_b"])
    };
    assert_eq!(Wanted::of(&asked).fine_resolution_hz, Some(50.0));
    assert_eq!(Wanted::of(&Limits::default()), Wanted::default());
    // A spectrum as wide as wanted leaves no mask segment undecided.
    for set in Library::published().unwrap().sets() {
        let Kind::Mask(mask) = &set.kind else {
            continue;
        };
        let asked = Limits {
            authorized_bandwidth_hz: Some(20e3),
            ..Limits::of_set(set.clone())
        };
        let wanted = Wanted::of(&asked);
        let take = |enbw_hz: f64| {
            let bin_hz = enbw_hz / 1.5;
            let bins = (wanted.span_hz / bin_hz).ceil() as usize;
            spectrum(bins, bin_hz, enbw_hz, |_| 1e-15)
        };
        let fine = take(wanted.fine_resolution_hz.unwrap());
        let peaks: Vec<Spectrum> = wanted
            .peak_hold_resolutions_hz
            .iter()
            .map(|hz| take(*hz))
            .collect();
        let judgement = judge(&measured(&fine, &peaks, 1.0), &asked);
        for check in &judgement.verdict.checks {
            assert_ne!(
                check.outcome,
                Outcome::Undecided,
                "{}: {}",
                check.name,
                check.reason
            );
        }
        assert!(mask.segments.len() >= judgement.verdict.checks.len());
    }
}

#[test]
fn polyline_has_both_sides() {
    let library = Library::published().unwrap();
    let Kind::Mask(mask) = &library.find("fcc_90_210_mask_d").unwrap().kind else {
        panic!("no mask");
    };
    let conditions = crate::limits::Conditions {
        power_w: Some(5.0),
        ..Default::default()
    };
    let line = mask_polyline(mask, None, &conditions, 30e3).unwrap();
    assert_eq!(line.first().unwrap().0, -30e3);
    assert_eq!(line.last().unwrap().0, 30e3);
    assert!(line.windows(2).all(|pair| pair[0].0 <= pair[1].0));
    near(line.last().unwrap().1, -56.989_700_043, 1e-9);
    assert!(mask_polyline(mask, None, &crate::limits::Conditions::default(), 30e3).is_err());
}

#[test]
fn json_keys_are_the_contract() {
    let judgement = mask_d(-30.0, -20.0);
    let json = serde_json::to_value(&judgement).unwrap();
    assert_eq!(json["verdict"]["outcome"], "within");
    assert_eq!(json["mask"][0]["side"], "lower");
    for key in [
        "from_hz",
        "to_hz",
        "margin_db",
        "worst_hz",
        "level_db",
        "limit_db",
        "unit",
        "set",
    ] {
        assert!(!json["mask"][0][key].is_null(), "{key}");
    }
    assert_eq!(json["mask"][0]["unit"], "dB");
    assert_eq!(json["verdict"]["checks"][0]["obtained"], "read");
}
