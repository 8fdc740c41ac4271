//! Masks with margins known by hand.

use super::*;
use crate::limits::Obtained;
use crate::units::db;

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
    // From 50 kHz beyond the edge of the authorized bandwidth -70 dBm in 100 Hz sum to -40 dBm in 100 kHz.
    let wide = margin(&judgement, 55.625e3, Side::Upper);
    near(wide.bandwidth_hz, 100e3, 0.0);
    near(wide.margin_db, 23.010_299_957, 1e-6);
    let check = &judgement.verdict.checks[2];
    assert_eq!(check.obtained, Some(Obtained::Read));
    for part in [
        "upper side, 20 kHz",
        "100 Hz (peak hold)",
        "-56.99 dB",
        "40.00 dBm",
    ] {
        assert!(check.reason.contains(part), "{part}: {}", check.reason);
    }
    assert_eq!(check.found.as_deref(), Some("-60.00 dB"));
    assert_eq!(check.allowed.as_deref(), Some("-56.99 dB"));
    // One number of the set was recalled: said once, for the set.
    let warned = |text: &String| text.contains("authorized_bandwidth_hz, recalled from memory");
    assert_eq!(
        judgement
            .warnings
            .iter()
            .filter(|text| warned(text))
            .count(),
        1
    );
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
    let fine = narrow.clone();
    let judgement = judge(
        &measured(&fine, &[narrow], 5.0),
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
    let judgement = judge(
        &measured(&fine, &[narrow], 5.0),
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

/// Printed by `tests/reference/mask_margins.py` (Python 3.11.7, NumPy 2.4.6): start of the segment,
/// side, margin in dB, offset in Hz. It reads every eighth of a bin, the program every bin: the
/// smallest margin may differ by what the smooth spectra change over half a bin, below 0.01 dB.
#[test]
fn margins_agree_with_brute_force() {
    use Side::{Lower, Upper};
    let fine = spectrum(8000, 20.0, 30.0, |hz| {
        1e-3 * 10f64.powf(-(hz.abs() / 4e3).powf(1.2)) * (1.0 + 0.5 * (hz / 3e3).sin()) + 1e-9
    });
    let judgement = judge(
        &measured(&fine, &[], fine.total_w()),
        &limits(&["fcc_90_210_mask_c"]),
    );
    for (from_hz, side, margin_db, worst_hz) in [
        (5e3, Lower, 17.3741, 10e3),
        (5e3, Upper, 17.6765, 8721.0),
        (10e3, Lower, 14.5600, 10e3),
        (10e3, Upper, 15.3851, 10e3),
    ] {
        let margin = margin(&judgement, from_hz, side);
        near(margin.margin_db, margin_db, 0.01);
        near(margin.worst_hz, worst_hz, 40.0);
    }
    let fine = spectrum(4000, 25e3, 25e3, |hz| {
        1e-9 * 10f64.powf(-(hz.abs() - 8e6).max(0.0) / 4e6) * (1.0 + 0.3 * (hz / 5e6).sin())
    });
    let judgement = judge(
        &measured(&fine, &[], fine.total_w()),
        &limits(&["ieee80211_ofdm20_mask"]),
    );
    for (from_hz, side, margin_db, worst_hz) in [
        (9e6, Lower, -10.1547, 11e6),
        (9e6, Upper, -12.3044, 11e6),
        (11e6, Lower, -10.1547, 11e6),
        (11e6, Upper, -12.3044, 11e6),
        (20e6, Lower, 2.2502, 20e6),
        (20e6, Upper, 4.2570, 20e6),
    ] {
        let margin = margin(&judgement, from_hz, side);
        near(margin.margin_db, margin_db, 0.01);
        near(margin.worst_hz, worst_hz, 25e3);
    }
}
