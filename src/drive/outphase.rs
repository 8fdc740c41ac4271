//! Scheme `outphase`: two stages of constant magnitude at +/- an angle. Joined, they share a load and their map over
//! the angle is solved as one circuit; the second branch's lower gain is part of that map, its phase and delay are
//! part of the angle. Isolated: two stages of constant magnitude at +/- an angle, summed by a combiner that shows
//! each of them its own load and burns the difference.
//!
//! ```text
//! angle = acos(level |x|),   branches exp(j (arg x +/- angle))
//! output = sqrt(2) V (b1 + g b2 exp(j e)) / 2
//! efficiency = branch efficiency * cos(angle)^2
//! ```
//! F. H. Raab, "Efficiency of outphasing RF power-amplifier systems", IEEE Trans. Commun., Oct. 1985.

use num_complex::Complex64;

use super::Track;
use super::angle::{AngleLaw, AngleTable, JoinedScheme};
use super::class_b::straight;
use super::correct::{Correction, Correctors};
use super::phase::{PhaseLimiter, magnitude};
use super::rate::{RateReason, band};
use super::supply::settling;
use crate::map::{Control, Map, MapError, MapPoint, Origin};
use crate::math::delay::Delay;

/// What becomes of the two outputs.
#[derive(Debug, Clone, Copy, PartialEq, Default, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Combining {
    /// Summed by a combiner that burns the difference.
    #[default]
    Isolated,
    /// Both on one load.
    Joined(JoinedScheme),
}

/// The scheme as the study describes it. The second branch is the weaker and the later one.
#[derive(Debug, Clone, Copy, PartialEq, Default, serde::Serialize)]
pub struct OutphaseScheme {
    /// How the branches meet.
    pub combining: Combining,
    /// How much weaker the second branch is, dB, 0 or more.
    pub gain_mismatch_db: f64,
    /// How far the second branch's phase is off, rad.
    pub phase_mismatch_rad: f64,
    /// How much later the second branch is, s.
    pub delay_mismatch_s: f64,
    /// -3 dB bandwidth of each branch's phasor in front of its limiter (half the band-pass), Hz.
    pub bandwidth_hz: Option<f64>,
    /// Order of that low-pass.
    pub order: u32,
}

impl OutphaseScheme {
    /// Its map over the drive: two stages as `top`, the point at full range, into one load of the same value.
    ///
    /// # Errors
    /// [`MapError`] where `top` is silent.
    pub fn map(
        frequency_hz: f64,
        load_ohm: f64,
        origin: Origin,
        top: &MapPoint,
    ) -> Result<Map, MapError> {
        let point = |drive: f64| MapPoint {
            control: drive,
            output_v: top.output_v * (std::f64::consts::SQRT_2 * drive),
            supply_a: top.supply_a.map(|ampere| 2.0 * ampere),
            efficiency: top.efficiency.map(|branch| branch * drive * drive),
            driver_w: top.driver_w.map(|watt| 2.0 * watt),
            ..top.clone()
        };
        let points = straight(point);
        Map::new(Control::Drive, origin, frequency_hz, load_ohm, points)
    }

    pub(super) fn settling(&self, rate_hz: f64) -> usize {
        settling(self.delay_mismatch_s, &[self.bandwidth_hz], rate_hz)
    }

    pub(super) fn rates(&self, signal_rate_hz: f64) -> Vec<(f64, RateReason)> {
        vec![
            (16.0 * signal_rate_hz, RateReason::Branches),
            (
                band(self.bandwidth_hz, signal_rate_hz),
                RateReason::PhaseBandwidth,
            ),
        ]
    }
}

/// The scheme at work at one sample rate.
#[derive(Debug, Clone)]
pub(super) struct OutphaseDrive {
    level: f64,
    mismatch: Complex64,
    wanted: Delay,
    later: Delay,
    branches: [PhaseLimiter; 2],
    last: Complex64,
    /// For joined branches.
    table: Option<(AngleLaw, AngleTable)>,
    correctors: Option<Correctors>,
}

impl OutphaseDrive {
    pub(super) fn new(scheme: &OutphaseScheme, map: &Map, level: f64, rate_hz: f64) -> Self {
        let table = match scheme.combining {
            Combining::Isolated => None,
            Combining::Joined(joined) => {
                Some((joined.law, AngleTable::new(map.known(), joined.law)))
            }
        };
        // Joined, the lower gain is in the map.
        let gain = match table {
            None => 10f64.powf(-scheme.gain_mismatch_db / 20.0),
            Some(_) => 1.0,
        };
        let limiter = PhaseLimiter::new(scheme.order.max(1), scheme.bandwidth_hz, rate_hz);
        Self {
            level,
            mismatch: Complex64::from_polar(gain, scheme.phase_mismatch_rad),
            wanted: Delay::new(0.0),
            later: Delay::new(scheme.delay_mismatch_s * rate_hz),
            branches: [limiter.clone(), limiter],
            last: Complex64::ONE,
            table,
            correctors: None,
        }
    }

    /// The same with `correction` in front of both branches, at `factor` times the signal's rate: it hands the law
    /// another magnitude.
    #[must_use]
    pub(super) fn corrected(mut self, correction: &Correction, factor: usize) -> Self {
        self.correctors = Some(Correctors::new(correction, factor));
        self
    }

    /// The angle that is asked for at the part `m` of full output, rad, and what both branches are turned by to undo
    /// the turn of the map.
    fn asked(&self, m: f64) -> (f64, f64) {
        let m = m.min(1.0);
        match &self.table {
            None => (m.acos(), 0.0),
            Some((law, table)) => table.at(m, *law),
        }
    }

    /// The phasor of one branch for the part `m` of full output and the phase of `sample`, at `sign` times the angle.
    fn phasor(&self, m: f64, sample: Complex64, sign: f64) -> Complex64 {
        let size = magnitude(sample);
        let direction = if size > 1e-9 {
            sample / size
        } else {
            self.last
        };
        if self.table.is_some() {
            let (angle, turn) = self.asked(m);
            return direction * Complex64::cis(sign * angle - turn);
        }
        let cosine = m.min(1.0);
        direction * Complex64::new(cosine, sign * (1.0 - cosine * cosine).sqrt())
    }

    pub(super) fn push(&mut self, samples: &[Complex64], track: &mut Track) {
        for &sample in samples {
            let wanted = self.wanted.push(sample);
            let later = self.later.push(sample);
            let own = |sample| (self.level * magnitude(sample), sample);
            let [first, second] = match &mut self.correctors {
                None => [own(wanted), own(later)],
                Some(correctors) => correctors.push_branches([wanted, later], self.level),
            };
            let asked = first.0;
            let first = self.phasor(first.0, first.1, 1.0);
            let second = self.phasor(second.0, second.1, -1.0);
            let first = self.branches[0].push(first);
            let second = self.branches[1].push(second) * self.mismatch;
            track.branches.push([first, second]);
            if self.table.is_some() {
                // Any two phases are an angle of at most a quarter turn and a common turn.
                let angle = 0.5 * (first * second.conj()).arg();
                let common = first * Complex64::cis(-angle);
                self.last = common;
                track.wanted.push(wanted);
                track.asked.push(self.asked(asked).0);
                track.control.push(angle);
                track.phase.push(common);
                continue;
            }
            let sum = 0.5 * (first + second);
            let drive = magnitude(sum);
            if drive > 1e-12 {
                self.last = sum / drive;
            }
            track.wanted.push(wanted);
            track.asked.push(asked.min(1.0));
            track.control.push(drive.min(1.0));
            track.phase.push(self.last);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::delay::LATENCY;

    fn signal() -> Vec<Complex64> {
        (0..4000)
            .map(|n| {
                let t = 0.01 * f64::from(n);
                Complex64::new(0.6 * t.cos(), 0.5 * (1.7 * t).sin())
            })
            .collect()
    }

    fn output(scheme: OutphaseScheme) -> Vec<Complex64> {
        let mut track = Track::default();
        OutphaseDrive::new(&scheme, &cosine_map(), 0.9, 1e6).push(&signal(), &mut track);
        let pairs = track.control.iter().zip(&track.phase);
        pairs.map(|(control, phase)| control * phase).collect()
    }

    /// Stiff branches: the output goes with the cosine of the angle.
    fn cosine_map() -> Map {
        let points = (-90..=90).map(|degrees: i32| {
            let angle = f64::from(degrees).to_radians();
            MapPoint {
                control: angle,
                output_v: Complex64::new(8.0, 6.0) * angle.cos(),
                supply_v: 6.0,
                supply_a: Some(0.1),
                efficiency: None,
                switch_peak_v: None,
                switch_peak_a: None,
                switch_min_v: None,
                closing_v: None,
                driver_w: None,
            }
        });
        Map::new(Control::Angle, Origin::Stage, 1e6, 50.0, points.collect()).unwrap()
    }

    #[test]
    fn joined_branches_give_the_signal_by_every_law() {
        let map = cosine_map();
        for (law, tolerance) in [
            // The curve through points a degree apart bends by 1e-5 of full output near its top.
            (AngleLaw::Inverse, 3e-5),
            (AngleLaw::Amplitude, 3e-5),
            (AngleLaw::Cosine, 3e-5),
        ] {
            let scheme = OutphaseScheme {
                combining: Combining::Joined(JoinedScheme {
                    joint: crate::orbit::Joint::new(crate::orbit::JointKind::Floating),
                    law,
                }),
                ..OutphaseScheme::default()
            };
            let mut track = Track::default();
            OutphaseDrive::new(&scheme, &map, 0.9, 1e6).push(&signal(), &mut track);
            for (n, sample) in signal().iter().enumerate().take(4000 - LATENCY) {
                let at = n + LATENCY;
                let output = map.output_held_v(track.control[at]).0 * track.phase[at];
                let wanted = 0.9 * sample * Complex64::new(8.0, 6.0);
                assert!(
                    (output - wanted).norm() < 10.0 * tolerance,
                    "{law:?} {n}: {output} {wanted}"
                );
            }
        }
    }

    #[test]
    fn ideal_branches_give_the_signal() {
        let output = output(OutphaseScheme::default());
        for (n, sample) in signal().iter().enumerate().take(4000 - LATENCY) {
            assert!((output[n + LATENCY] - 0.9 * sample).norm() < 1e-12);
        }
    }

    #[test]
    fn mismatch_leaves_the_residual_in_closed_form() {
        // Branches u (c +/- j s) with c = m, s = sqrt(1 - m^2): a second branch off by the factor d leaves
        // u (c (1 + d) + j s (1 - d)) / 2. What of s is no multiple of c is the residual:
        // |1 - d|^2 / |1 + d|^2 (<s^2> - <c s>^2 / <c^2>) / <c^2>.
        let scheme = OutphaseScheme {
            gain_mismatch_db: 0.3,
            phase_mismatch_rad: 0.02,
            ..OutphaseScheme::default()
        };
        let output = output(scheme);
        let wanted = signal();
        let count = 4000 - LATENCY;
        let (mut xx, mut xy, mut yy) = (0.0, Complex64::ZERO, 0.0);
        for (x, y) in wanted[..count].iter().zip(&output[LATENCY..]) {
            xx += x.norm_sqr();
            xy += x.conj() * y;
            yy += y.norm_sqr();
        }
        let found = yy / (xy.norm_sqr() / xx) - 1.0;
        let mean = |part: fn(f64) -> f64| {
            let sum: f64 = wanted[..count].iter().map(|x| part(0.9 * x.norm())).sum();
            sum / count as f64
        };
        let (cc, ss) = (mean(|m| m * m), mean(|m| 1.0 - m * m));
        let cs = mean(|m| m * (1.0 - m * m).sqrt());
        let d = Complex64::from_polar(10f64.powf(-0.3 / 20.0), 0.02);
        let law = (1.0 - d).norm_sqr() / (1.0 + d).norm_sqr() * (ss - cs * cs / cc) / cc;
        assert!((10.0 * (found / law).log10()).abs() < 0.2, "{found} {law}");
    }

    #[test]
    fn efficiency_falls_with_the_square_of_the_cosine() {
        let top = MapPoint {
            control: 6.0,
            output_v: Complex64::new(3.0, 4.0),
            supply_v: 6.0,
            supply_a: Some(0.05),
            efficiency: None,
            switch_peak_v: None,
            switch_peak_a: None,
            switch_min_v: None,
            closing_v: None,
            driver_w: None,
        };
        let map = OutphaseScheme::map(1e6, 50.0, Origin::Stage, &top).unwrap();
        let branch = 25.0 / 100.0 / (6.0 * 0.05);
        for angle in [0.0f64, 0.3, 0.8, 1.3] {
            let (volt, _) = map.output_held_v(angle.cos());
            let drawn = 6.0 * map.supply_held_a(angle.cos()).unwrap();
            let efficiency = volt.norm_sqr() / 100.0 / drawn;
            // Raab 1985, isolated: within rounding of the interpolation.
            assert!((efficiency - branch * angle.cos().powi(2)).abs() < 1e-9);
        }
    }
}
