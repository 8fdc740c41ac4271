use super::*;
use crate::limits::{Library, Limits};
use crate::metrics::Spectrum;
use crate::units::watt_from_dbm;

mod masks;
mod properties;
mod rows;
mod whole;

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
        stress: None,
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
    let fine = narrow.clone();
    judge(
        &measured(&fine, &[narrow], 5.0),
        &limits(&["fcc_90_210_mask_d"]),
    )
}
