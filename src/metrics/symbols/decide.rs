//! The point of a constellation that a received one stands for.

use std::f64::consts::{FRAC_PI_4, PI};

use num_complex::Complex64;

use crate::signal::Modulation;

/// The nearest point to `z`, of unit mean power over the constellation. Of pi/4-DQPSK symbol `index` has a
/// multiple of 90 degrees where it is even, and one 45 degrees beside where it is odd.
pub fn nearest_point(modulation: Modulation, index: u64, z: Complex64) -> Complex64 {
    let eighth = |offset: f64, step: f64| {
        let turns = ((z.arg() - offset) / step).round();
        Complex64::cis(offset + turns * step)
    };
    match modulation {
        Modulation::Qpsk => levels(z, 1, 2f64.sqrt()),
        Modulation::Qam16 => levels(z, 2, 10f64.sqrt()),
        Modulation::Qam64 => levels(z, 3, 42f64.sqrt()),
        Modulation::Psk8 => eighth(0.0, FRAC_PI_4),
        Modulation::Pi4Dqpsk => eighth((index % 2) as f64 * FRAC_PI_4, 2.0 * FRAC_PI_4),
    }
}

/// Odd levels on both axes, up to `2^bits - 1`.
fn levels(z: Complex64, bits: u32, scale: f64) -> Complex64 {
    let most = f64::from((1u32 << bits) - 1);
    let level = |x: f64| (2.0 * (x * scale / 2.0).floor() + 1.0).clamp(-most, most) / scale;
    Complex64::new(level(z.re), level(z.im))
}

/// The power that takes the points of a constellation to one angle, and that angle.
pub(super) fn symmetry(modulation: Modulation) -> (i32, f64) {
    match modulation {
        Modulation::Qpsk | Modulation::Qam16 | Modulation::Qam64 => (4, PI),
        Modulation::Pi4Dqpsk => (4, 0.0),
        Modulation::Psk8 => (8, 0.0),
    }
}

/// `z` to the power of the symmetry, the alternation of pi/4-DQPSK taken off.
pub(super) fn stripped(modulation: Modulation, index: u64, z: Complex64) -> Complex64 {
    let power = z.powi(symmetry(modulation).0);
    if modulation == Modulation::Pi4Dqpsk && index % 2 == 1 {
        -power
    } else {
        power
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn points_decide_for_themselves_and_noise_for_the_nearest() {
        for modulation in [
            Modulation::Qpsk,
            Modulation::Psk8,
            Modulation::Qam16,
            Modulation::Qam64,
        ] {
            let points: Vec<_> = (0..1u32 << modulation.bits())
                .map(|word| modulation.point(word))
                .collect();
            for step in 0..500 {
                let angle = f64::from(step) * 0.7;
                let z = Complex64::from_polar(f64::from(step) * 0.003, angle);
                let best = points
                    .iter()
                    .min_by(|a, b| (*a - z).norm().total_cmp(&(*b - z).norm()))
                    .unwrap();
                let decided = nearest_point(modulation, 0, z);
                // Of two equally near ones either may be taken.
                let worse = (decided - z).norm() - (best - z).norm();
                assert!(worse < 1e-12, "{modulation:?} {z}: {decided} {best}");
            }
        }
    }
}
