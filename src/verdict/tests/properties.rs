//! What holds for any spectrum.

use proptest::prelude::*;

use super::super::reading::Bands;
use super::*;

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
