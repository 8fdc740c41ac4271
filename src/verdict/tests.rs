use proptest::prelude::*;

use super::reading::Bands;
use super::*;
use crate::limits::{AcprLimit, Kind, Library, Limits, Obtained};
use crate::metrics::{ChannelFilter, Spectrum};
use crate::units::{db, watt_from_dbm};

/// A spectrum whose density at each bin centre is `density`, W/Hz, mean and peak alike.
fn spectrum(bins: usize, bin_hz: f64, enbw_hz: f64, density: impl Fn(f64) -> f64) -> Spectrum {
    let mut spectrum = Spectrum {
        bin_hz,
        enbw_hz,
        mean_w_per_hz: vec![0.0; bins],
        peak_w_per_hz: None,
        segments: 1,
    };
    let values: Vec<f64> = (0..bins)
        .map(|bin| density(spectrum.offset_hz(bin)))
        .collect();
    spectrum.mean_w_per_hz.clone_from(&values);
    spectrum.peak_w_per_hz = Some(values);
    spectrum
}

fn limits(names: &[&str]) -> Limits {
    let library = Library::published().unwrap();
    Limits {
        sets: names
            .iter()
            .map(|name| library.find(name).unwrap().clone())
            .collect(),
        ..Limits::default()
    }
}

fn measured<'a>(fine: &'a Spectrum, peak_hold: &'a [Spectrum], mean_w: f64) -> Measured<'a> {
    Measured {
        fine,
        peak_hold,
        mean_w,
        peak_w: 2.0 * mean_w,
        evm_percent: None,
        evm_peak_percent: None,
        evm_p95_percent: None,
        evm_p99_percent: None,
        modulation: None,
        harmonics_dbc: None,
    }
}

fn margin(judgement: &Judgement, from_hz: f64, side: Side) -> &MaskMargin {
    judgement
        .mask
        .iter()
        .find(|margin| (margin.from_hz - from_hz).abs() < 1.0 && margin.side == side)
        .unwrap_or_else(|| panic!("nothing from {from_hz} Hz: {:?}", judgement.mask))
}

fn near(value: f64, wanted: f64, tolerance: f64) {
    assert!(
        (value - wanted).abs() <= tolerance,
        "{value}, wanted {wanted}"
    );
}

/// 5 W mean, 10 W (40 dBm) peak; peak-hold readings of `upper_dbm` at +20 kHz and `lower_dbm` at
/// -20 kHz in 100 Hz; -70 dBm elsewhere.
fn mask_d(lower_dbm: f64, upper_dbm: f64) -> Judgement {
    let narrow = spectrum(8000, 50.0, 100.0, |hz| {
        let dbm = match hz.round() as i64 {
            20_000 => upper_dbm,
            -20_000 => lower_dbm,
            _ => -70.0,
        };
        watt_from_dbm(dbm) / 100.0
    });
    let wide = spectrum(16, 25e3, 100e3, |_| watt_from_dbm(-50.0) / 100e3);
    let fine = narrow.clone();
    judge(
        &measured(&fine, &[narrow, wide], 5.0),
        &limits(&["fcc_90_210_mask_d"]),
    )
}

#[test]
fn mask_d_at_5_watt_is_56_99_db_below_the_peak() {
    let judgement = mask_d(-30.0, -20.0);
    // Limit 40 - (50 + 10 log10 5) = -16.9897 dBm.
    let upper = margin(&judgement, 12.5e3, Side::Upper);
    near(upper.limit_db, -56.989_700_043, 1e-9);
    near(upper.level_db, -60.0, 1e-9);
    near(upper.margin_db, 3.010_299_957, 1e-9);
    near(upper.worst_hz, 20e3, 1e-9);
    near(
        margin(&judgement, 12.5e3, Side::Lower).margin_db,
        13.010_299_957,
        1e-9,
    );
    assert_eq!(judgement.verdict.outcome, Outcome::Within);
    // 100 kHz readings of -50 dBm from 50 kHz beyond the edge of the authorized bandwidth.
    let wide = margin(&judgement, 55.625e3, Side::Upper);
    near(wide.bandwidth_hz, 100e3, 0.0);
    near(wide.margin_db, 33.010_299_957, 1e-9);
    let check = &judgement.verdict.checks[2];
    assert_eq!(check.obtained, Some(Obtained::Read));
    for part in [
        "upper side, 20 kHz",
        "100 Hz (peak hold)",
        "-56.99 dB",
        "40.00 dBm",
        "memory",
    ] {
        assert!(check.reason.contains(part), "{part}: {}", check.reason);
    }
}

#[test]
fn one_side_is_enough_to_fail() {
    let judgement = mask_d(-10.0, -20.0);
    assert_eq!(judgement.verdict.outcome, Outcome::Outside);
    let lower = margin(&judgement, 12.5e3, Side::Lower);
    near(lower.margin_db, -6.989_700_043, 1e-9);
    assert!(judgement.verdict.checks[2].reason.contains("lower side"));
    assert!(
        judgement.verdict.checks[2]
            .reason
            .contains("6.99 dB too much")
    );
    assert_eq!(
        judgement.verdict.tightest().map(|check| &check.name),
        Some(&judgement.verdict.checks[2].name)
    );
}

#[test]
fn segment_ends_are_judged_by_both_neighbours() {
    // A reading right at 12.5 kHz: -69.94 dB of the sloped segment is the tighter limit there.
    let narrow = spectrum(8000, 50.0, 100.0, |hz| {
        watt_from_dbm(if hz.round() as i64 == 12_500 {
            -25.0
        } else {
            -70.0
        }) / 100.0
    });
    let wide = spectrum(16, 25e3, 100e3, |_| watt_from_dbm(-50.0) / 100e3);
    let fine = narrow.clone();
    let judgement = judge(
        &measured(&fine, &[narrow, wide], 5.0),
        &limits(&["fcc_90_210_mask_d"]),
    );
    // 40 - 69.9374 = -29.9374 dBm against -25 dBm.
    near(
        margin(&judgement, 5625.0, Side::Upper).margin_db,
        -4.937_4,
        1e-9,
    );
    near(
        margin(&judgement, 12.5e3, Side::Upper).margin_db,
        8.010_299_957,
        1e-9,
    );
}

#[test]
fn without_the_peak_hold_it_is_undecided() {
    let fine = spectrum(8000, 50.0, 100.0, |_| 1e-12);
    let judgement = judge(&measured(&fine, &[], 5.0), &limits(&["fcc_90_210_mask_d"]));
    assert_eq!(judgement.verdict.outcome, Outcome::Undecided);
    assert!(
        judgement.verdict.checks[0]
            .reason
            .contains("peak hold in 100 Hz")
    );
    // 10 % off is another bandwidth.
    let off = spectrum(8000, 50.0, 110.0, |_| 1e-12);
    let judgement = judge(
        &measured(&fine, &[off], 5.0),
        &limits(&["fcc_90_210_mask_d"]),
    );
    assert_eq!(judgement.verdict.outcome, Outcome::Undecided);
}

/// 10 W flat over +/-5 kHz, and `density_db` below that power in each 200 Hz from 12 to 18 kHz above.
fn mask_b(density_db: f64, bins: usize) -> Judgement {
    let fine = spectrum(bins, 20.0, 30.0, |hz| {
        if hz.abs() <= 5000.0 {
            10.0 / 10_020.0
        } else if (12e3..18e3).contains(&hz) {
            10.0 * 10f64.powf(density_db / 10.0) / 200.0
        } else {
            1e-16
        }
    });
    let limits = Limits {
        authorized_bandwidth_hz: Some(20e3),
        ..limits(&["fcc_90_210_mask_b"])
    };
    judge(&measured(&fine, &[], 10.0), &limits)
}

#[test]
fn mask_b_reads_the_mean_in_one_percent_against_the_channel() {
    let judgement = mask_b(-30.0, 8000);
    let upper = margin(&judgement, 10e3, Side::Upper);
    near(upper.bandwidth_hz, 200.0, 1e-9);
    // The running sums cost nothing that shows in ten digits.
    near(upper.margin_db, 5.0, 1e-6);
    near(upper.level_db, -30.0, 1e-6);
    assert_eq!(judgement.verdict.outcome, Outcome::Within);
    assert!(
        judgement.verdict.checks[0]
            .reason
            .contains("fixes no bandwidth, 200 Hz")
    );
    // Nothing of the wanted signal is in reach on the other side.
    assert!(margin(&judgement, 10e3, Side::Lower).margin_db > 60.0);
    assert_eq!(mask_b(-20.0, 8000).verdict.outcome, Outcome::Outside);
    let line = &judgement.lines[0];
    assert_eq!((line.side, line.points[0].0), (Side::Lower, -10e3));
    near(line.points[0].1, 40.0 - 25.0, 1e-6);
}

#[test]
fn an_open_end_is_judged_to_the_sampled_edge_and_an_unseen_segment_not() {
    // 3200 bins of 20 Hz: 32 kHz to a side. 35 dB is asked for from 20 to 50 kHz.
    let judgement = mask_b(-30.0, 3200);
    let partly = &judgement.verdict.checks[1];
    assert_eq!(partly.outcome, Outcome::Within);
    assert!(
        partly.reason.contains("where the sampled range ends"),
        "{}",
        partly.reason
    );
    // Nobody looked beyond 50 kHz.
    let unseen = &judgement.verdict.checks[2];
    assert_eq!(unseen.outcome, Outcome::Undecided);
    assert!(
        unseen.reason.contains("a sample rate above 100.2 kHz"),
        "{}",
        unseen.reason
    );
    assert_eq!(judgement.verdict.outcome, Outcome::Undecided);
    // 8000 bins: 80 kHz; the open end is judged to there.
    let open = mask_b(-30.0, 8000);
    assert_eq!(open.verdict.outcome, Outcome::Within);
    near(margin(&open, 50e3, Side::Upper).to_hz, 79_870.0, 20.0);
    assert!(
        open.warnings
            .iter()
            .any(|text| text.contains("sampled range ends"))
    );
}

#[test]
fn mask_d_beyond_the_change_of_bandwidth_is_a_remark() {
    // 2000 bins of 50 Hz: 50 kHz to a side.
    let narrow = spectrum(2000, 50.0, 100.0, |_| watt_from_dbm(-70.0) / 100.0);
    let fine = narrow.clone();
    let wide = spectrum(16, 6.25e3, 100e3, |_| 1e-20);
    let judgement = judge(
        &measured(&fine, &[narrow, wide], 5.0),
        &limits(&["fcc_90_210_mask_d"]),
    );
    assert_eq!(judgement.verdict.outcome, Outcome::Within);
    assert_eq!(judgement.verdict.checks.len(), 3);
    assert!(
        judgement
            .warnings
            .iter()
            .any(|text| text.contains("nothing was sampled there"))
    );
}

#[test]
fn densities_count_from_the_highest_in_the_channel() {
    let fine = spectrum(4000, 25e3, 25e3, |hz| {
        if hz.abs() <= 8e6 {
            1e-9
        } else if (24e6..26e6).contains(&hz) {
            1e-9 * 10f64.powf(-3.6)
        } else {
            1e-15
        }
    });
    let judgement = judge(
        &measured(&fine, &[], 0.016),
        &limits(&["ieee80211_ofdm20_mask"]),
    );
    // -36 dBr up to 26 MHz; the mask falls from -28 at 20 MHz to -40 at 30 MHz. The last centre whose
    // 100 kHz lie below the upper edge of the bin at 25.975 MHz is 25.9375 MHz: limit -35.125 dB, but
    // further out a falling part of the filter still reads.
    let upper = margin(&judgement, 20e6, Side::Upper);
    let naive = (0..4000)
        .map(|at| 25.8e6 + 1e3 * f64::from(at % 300))
        .map(|centre_hz| {
            let w = fine.power_w(centre_hz - 50e3, centre_hz + 50e3).unwrap();
            let limit_db = -28.0 - 12.0 * (centre_hz - 20e6) / 10e6;
            limit_db - db(w / (1e-9 * 100e3))
        })
        .fold(f64::INFINITY, f64::min);
    // A step of 25 kHz may miss the worst centre of a slope of 1.2 dB/MHz by 0.03 dB.
    near(upper.margin_db, naive, 0.03);
    near(upper.reference_dbm.unwrap(), -10.0, 1e-6);
    assert_eq!(judgement.verdict.outcome, Outcome::Within);
    // The stretch that is met by definition is no check.
    assert!(judgement.mask.iter().all(|margin| margin.from_hz > 8e6));
}

#[test]
fn both_limits_count_and_the_tighter_decides() {
    let at = |carrier_dbm: f64| {
        let fine = spectrum(4000, 5e3, 10e3, |hz| {
            watt_from_dbm(if hz.abs() < 1e6 { carrier_dbm } else { -35.0 }) / 100e3
        });
        let judgement = judge(
            &measured(&fine, &[], 0.01),
            &limits(&["ieee802154_2450_psd"]),
        );
        let margin = margin(&judgement, 3.5e6, Side::Upper);
        (margin.margin_db, margin.unit)
    };
    let (margin_db, unit) = at(0.0);
    near(margin_db, 5.0, 1e-6);
    assert_eq!(unit, Unit::Dbm);
    let (margin_db, unit) = at(-16.0);
    near(margin_db, -1.0, 1e-6);
    assert_eq!(unit, Unit::Decibel);
}

#[test]
fn offsets_from_the_channel_edge_keep_the_filter_outside() {
    // 23 dBm over the whole 5 MHz channel; -20 dBm in 30 kHz up to 1 MHz beyond its edge.
    let fine = spectrum(8192, 5e3, 7.5e3, |hz| {
        if hz.abs() <= 2.5e6 {
            0.2 / 5e6
        } else if hz.abs() <= 3.5e6 {
            watt_from_dbm(-20.0) / 30e3
        } else {
            watt_from_dbm(-40.0) / 1e6
        }
    });
    let judgement = judge(&measured(&fine, &[], 0.2), &limits(&["lte_ue_sem_5mhz"]));
    let first = margin(&judgement, 2.5e6, Side::Upper);
    // The first bin outside reaches from 2.5025 MHz: the filter from 2.5 MHz still sees 2.5 kHz of
    // the channel at 0.2 W / 5 MHz: 0.1 mW (-10 dBm).
    let leak_w = 0.2 / 5e6 * 2.5e3 + watt_from_dbm(-20.0) / 30e3 * 27.5e3;
    near(first.worst_hz, 2.515e6, 1.0);
    near(first.margin_db, -15.0 - (db(leak_w) + 30.0), 1e-6);
    assert_eq!(first.unit, Unit::Dbm);
    assert_eq!(judgement.verdict.checks.len(), 4);
}

#[test]
fn edge_counts_from_30_khz_on_the_carrier() {
    let fine = spectrum(8192, 2e3, 3e3, |hz| {
        watt_from_dbm(match hz.abs() {
            hz if hz < 50e3 => 25.0,
            hz if hz > 380e3 && hz < 420e3 => -32.0,
            _ => -60.0,
        }) / 30e3
    });
    let judgement = judge(
        &measured(&fine, &[], 1.0),
        &limits(&["edge_ms_modulation_spectrum_33dbm"]),
    );
    // -57 dB against -54 dB at exactly 400 kHz.
    let point = margin(&judgement, 400e3, Side::Lower);
    near(point.margin_db, 3.0, 1e-6);
    assert_eq!((point.from_hz, point.to_hz), (400e3, 400e3));
    assert_eq!(judgement.verdict.outcome, Outcome::Within);
    let check = &judgement.verdict.checks[3];
    assert!(
        check.reason.contains("recalled from memory"),
        "{}",
        check.reason
    );
    assert_eq!(check.obtained, Some(Obtained::Memory));
}

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
fn wanted_spectra() {
    let wanted = Wanted::of(&limits(&["fcc_90_210_mask_d", "fcc_90_210_mask_e"]));
    assert_eq!(wanted.peak_hold_resolutions_hz, [100.0, 100e3]);
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

proptest! {
    /// Running sums and the direct sum read the same power.
    #[test]
    fn bands_agree_with_the_direct_sum(
        densities in prop::collection::vec(1e-12..1.0f64, 200..400),
        from in 0.0..1.0f64,
        to in 0.0..1.0f64,
    ) {
        let bins = densities.len();
        let spectrum = spectrum(bins, 3.0, 4.5, |hz| {
            densities[((hz / 3.0).round() as i64 + (bins / 2) as i64) as usize]
        });
        let (low, high) = spectrum.range_hz();
        let (from_hz, to_hz) = (low + from.min(to) * (high - low), low + from.max(to) * (high - low));
        let direct = spectrum.power_w(from_hz, to_hz).unwrap();
        let fast = Bands::new(&spectrum).power_w(from_hz, to_hz);
        // Rounding of a sum of 400 terms up to 3 W each.
        prop_assert!((direct - fast).abs() <= 1e-9, "{direct} {fast}");
    }

    /// The same output, 20 dB down, has the same margin against a relative limit.
    #[test]
    fn relative_margins_do_not_depend_on_the_scale(level_db in -60.0..-20.0f64) {
        let at = |scale: f64| {
            let fine = spectrum(2000, 50e3, 50e3, |hz| {
                scale * if hz.abs() <= 8e6 { 1e-9 } else { 1e-9 * 10f64.powf(level_db / 10.0) }
            });
            let judgement = judge(&measured(&fine, &[], scale * 0.016), &limits(&["ieee80211_ofdm20_mask"]));
            margin(&judgement, 20e6, Side::Lower).margin_db
        };
        prop_assert!((at(1.0) - at(0.01)).abs() < 1e-9);
    }
}
