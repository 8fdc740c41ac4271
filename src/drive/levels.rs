//! Scheme `levels`: the supply is switched among a few rails, the width does the rest.
//!
//! A linear stage scales with its supply: `V(supply, width) = supply / full * V(full, width)`. A curved one is
//! solved at each rail and at supplies between them.
//!
//! Rails change where the wanted amplitude, taken as straight between two instants, crosses a threshold. An instant
//! within which that happens hands on its parts, so that the output is the mean over the instant and margins do
//! not hang on where the instants fall. A row's supply is its mean over the instant likewise.

use num_complex::Complex64;

use super::phase::{PhaseLimiter, magnitude};
use super::rails::{Change, Decider, Rails};
use super::rate::{RateReason, band};
use super::supply::{PhasePath, settling};
use super::width::{Inverse, WidthLaw};
use super::{Track, TrackPart};
use crate::map::Map;
use crate::math::delay::Delay;

/// The scheme as the study describes it.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct LevelsScheme {
    /// Rails, rising, the last one the full supply.
    pub rails: Rails,
    /// From the wanted part of a rail's output to the width.
    pub law: WidthLaw,
    /// Part of a rail's output by which the wanted amplitude must fall below it before it is taken.
    pub hysteresis: f64,
    /// Time in which a change of the rail settles to 1 %, s.
    pub settling_s: f64,
    /// Power out over power in of what makes the rails.
    pub efficiency: f64,
    /// Power that it draws whatever it delivers, W.
    pub idle_w: f64,
    /// What makes the drive's phase.
    pub phase_path: PhasePath,
}

impl LevelsScheme {
    pub(super) fn settling(&self, rate_hz: f64) -> usize {
        let dead = self.phase_path.delay_s.max(3.0 * self.settling_s);
        settling(dead, &[self.phase_path.bandwidth_hz], rate_hz) + 2
    }

    pub(super) fn rates(&self, signal_rate_hz: f64) -> Vec<(f64, RateReason)> {
        let settled = if self.settling_s > 0.0 {
            // Four instants to a time constant, no finer than is seen by the signal.
            band(Some(100f64.ln() / self.settling_s), signal_rate_hz)
        } else {
            16.0 * signal_rate_hz
        };
        vec![
            (settled, RateReason::Edges),
            (
                band(self.phase_path.bandwidth_hz, signal_rate_hz),
                RateReason::PhaseBandwidth,
            ),
        ]
    }

    /// The working points at rest for `steps` even parts of full output on `map`, rising from the first part.
    pub fn at_rest(&self, map: &Map, steps: usize) -> Vec<RestPoint> {
        let full_supply_v = map.own_supply_v();
        let rails = RailWidths::of(self, map);
        let reaches: Vec<f64> = rails.iter().map(|rail| rail.reach).collect();
        (1..=steps)
            .map(|step| {
                let part = step as f64 / steps as f64;
                let rail = &rails[Decider::at_rest(&reaches, part)];
                RestPoint {
                    part,
                    supply_v: rail.part * full_supply_v,
                    width: rail.inverse.width(part / rail.reach),
                }
            })
            .collect()
    }
}

/// A working point of `levels` while the signal rests.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RestPoint {
    /// Part of full output.
    pub part: f64,
    /// The rail, V.
    pub supply_v: f64,
    /// Part of the period.
    pub width: f64,
}

/// What the width does on one rail.
#[derive(Debug, Clone)]
struct RailWidths<'a> {
    /// Of the full supply.
    part: f64,
    /// Highest output, as a part of that at full supply: the same for a linear stage.
    reach: f64,
    map: &'a Map,
    inverse: Inverse,
}

impl<'a> RailWidths<'a> {
    fn of(scheme: &LevelsScheme, map: &'a Map) -> Vec<Self> {
        let full_v = map.own_supply_v();
        let top = |map: &Map| map.amplitude_held_v(map.turns_at().unwrap_or(map.domain().1));
        let parts = scheme.rails.parts(full_v);
        parts
            .into_iter()
            .map(|part| {
                let plane = map.plane(part * full_v);
                let scale = part * full_v / plane.own_supply_v();
                Self {
                    part,
                    reach: scale * top(plane) / top(map),
                    map: plane,
                    inverse: Inverse::new(plane),
                }
            })
            .collect()
    }
}

/// The scheme at work at one sample rate.
#[derive(Debug, Clone)]
pub(super) struct LevelsDrive<'a> {
    law: WidthLaw,
    rails: Vec<RailWidths<'a>>,
    decider: Decider,
    /// Changes from the last instant to the present one, and from there to the next.
    before: Vec<Change>,
    after: Vec<Change>,
    level: f64,
    full_supply_v: f64,
    full_width: f64,
    full_rad: f64,
    /// Wanted part of full output at the last instant, the present one and the next.
    wanted_m: [f64; 3],
    /// At the start of the present instant's time.
    rail: usize,
    supply: f64,
    /// Rate at which a change settles, to an instant; infinite where it does at once.
    rate: f64,
    wanted: Delay,
    ahead: Delay,
    angle: Delay,
    phase: PhaseLimiter,
}

impl<'a> LevelsDrive<'a> {
    pub(super) fn new(scheme: &LevelsScheme, map: &'a Map, level: f64, rate_hz: f64) -> Self {
        let full = map.domain().1;
        let full_supply_v = map.own_supply_v();
        let rails = RailWidths::of(scheme, map);
        let reaches = rails.iter().map(|rail| rail.reach).collect();
        Self {
            law: scheme.law,
            rail: rails.len() - 1,
            supply: 1.0,
            rails,
            decider: Decider::new(reaches, scheme.hysteresis),
            before: Vec::new(),
            after: Vec::new(),
            level,
            full_supply_v,
            full_width: full,
            full_rad: map.phase_held_rad(full),
            wanted_m: [0.0; 3],
            rate: if scheme.settling_s > 0.0 {
                100f64.ln() / (scheme.settling_s * rate_hz)
            } else {
                f64::INFINITY
            },
            // One instant later than the decision, which looks half an instant ahead.
            wanted: Delay::new(1.0),
            ahead: Delay::new(0.0),
            angle: Delay::new(scheme.phase_path.delay_s * rate_hz + 1.0),
            phase: PhaseLimiter::new(
                scheme.phase_path.order,
                scheme.phase_path.bandwidth_hz,
                rate_hz,
            ),
        }
    }

    /// The width for the part `m` of full output on `rail`, and the phasor that undoes what the stage adds.
    fn width(&self, rail: usize, m: f64) -> (f64, Complex64) {
        let rail = &self.rails[rail];
        let m = (m / rail.reach).min(1.0);
        let width = self.law.width(&rail.inverse, self.full_width, m);
        let turn = match self.law {
            WidthLaw::Inverse => Complex64::cis(self.full_rad - rail.map.phase_held_rad(width)),
            WidthLaw::Amplitude | WidthLaw::Sine => Complex64::ONE,
        };
        (width, turn)
    }

    /// Lets the supply settle for `time`, in instants; its mean meanwhile.
    fn settle(&mut self, time: f64) -> f64 {
        let target = self.rails[self.rail].part;
        let off = self.supply - target;
        if self.rate.is_infinite() || off == 0.0 {
            self.supply = target;
            return target;
        }
        let fallen = -(-self.rate * time).exp_m1();
        self.supply = target + off * (1.0 - fallen);
        if time > 0.0 {
            target + off * fallen / (self.rate * time)
        } else {
            target
        }
    }

    /// The wanted part of full output at `time` from the present instant, straight between instants.
    fn wanted_at(&self, time: f64) -> f64 {
        let [before, now, after] = self.wanted_m;
        let other = if time < 0.0 { before } else { after };
        now + (other - now) * time.abs()
    }

    pub(super) fn push(&mut self, samples: &[Complex64], track: &mut Track) {
        for &sample in samples {
            let wanted = self.wanted.push(sample);
            let angle = self.angle.push(sample);
            let next = (self.level * magnitude(self.ahead.push(sample))).min(1.0);
            self.wanted_m = [self.wanted_m[1], self.wanted_m[2], next];
            std::mem::swap(&mut self.before, &mut self.after);
            let [_, now, _] = self.wanted_m;
            let mut after = std::mem::take(&mut self.after);
            self.decider.changes(now, next, &mut after);
            self.after = after;
            let phase = self.phase.push(angle);
            self.instant(now, phase, track);
            track.wanted.push(wanted);
        }
    }

    /// The half of the time before the present instant and the half after it.
    fn instant(&mut self, now: f64, phase: Complex64, track: &mut Track) {
        let at = track.control.len();
        let inside = |time: f64| (-0.5..0.5).contains(&time);
        let before = self.before.iter().map(|c| (c.at - 1.0, c.rail));
        let after = self.after.iter().map(|c| (c.at, c.rail));
        let mut changes = before.chain(after).filter(|(time, _)| inside(*time));
        let Some(first) = changes.next() else {
            let supply = self.settle(1.0);
            let (width, turn) = self.width(self.rail, now);
            track.asked.push(width);
            track.control.push(width);
            track.phase.push(phase * turn);
            track.supply_v.push(supply * self.full_supply_v);
            return;
        };
        let changes: Vec<(f64, usize)> = std::iter::once(first).chain(changes).collect();
        let mut start = -0.5;
        let mut middle = None;
        let mut mean = 0.0;
        let ends = changes
            .iter()
            .copied()
            .chain(std::iter::once((0.5, usize::MAX)));
        for (end, rail) in ends {
            let weight = end - start;
            let supply = self.settle(weight);
            let (control, turn) = self.width(self.rail, self.wanted_at(0.5 * (start + end)));
            mean += weight * supply;
            if middle.is_none() && end > 0.0 {
                middle = Some(self.width(self.rail, now));
            }
            if weight > 0.0 {
                track.parts.push(TrackPart {
                    at,
                    weight,
                    control,
                    phase: phase * turn,
                    supply_v: supply * self.full_supply_v,
                });
            }
            if rail != usize::MAX {
                self.rail = rail;
            }
            start = end;
        }
        let (width, turn) = middle.unwrap_or((self.full_width, Complex64::ONE));
        track.asked.push(width);
        track.control.push(width);
        track.phase.push(phase * turn);
        track.supply_v.push(mean * self.full_supply_v);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::map::{Control, MapPoint, Origin};

    fn track(hysteresis: f64, settling_s: f64, samples: &[Complex64]) -> Track {
        let points = (1..=200).map(|at| {
            let width = 0.5 * f64::from(at) / 200.0;
            MapPoint {
                control: width,
                output_v: Complex64::from_polar(
                    8.0 * (std::f64::consts::PI * width).sin(),
                    0.2 + width,
                ),
                supply_v: 6.0,
                supply_a: None,
                efficiency: None,
                switch_peak_v: None,
                switch_peak_a: None,
                switch_min_v: None,
                closing_v: None,
                driver_w: None,
            }
        });
        let map = Map::new(Control::Width, Origin::Stage, 1e8, 50.0, points.collect()).unwrap();
        let scheme = LevelsScheme {
            rails: Rails::Parts(vec![0.25, 0.5, 1.0]),
            law: WidthLaw::Inverse,
            hysteresis,
            settling_s,
            efficiency: 1.0,
            idle_w: 0.0,
            phase_path: PhasePath::default(),
        };
        let mut track = Track::default();
        LevelsDrive::new(&scheme, &map, 1.0, 1e6).push(samples, &mut track);
        track
    }

    #[test]
    fn rails_are_used_as_often_as_the_amplitude_lies_below_them() {
        // A ramp of the magnitude: a quarter of the time each below 0.25 and 0.25 to 0.5, half above.
        let samples: Vec<_> = (0..20_000)
            .map(|n| Complex64::new(f64::from(n) / 20_000.0, 0.0))
            .collect();
        let track = track(0.0, 0.0, &samples);
        for (rail_v, share) in [(1.5, 0.25), (3.0, 0.25), (6.0, 0.5)] {
            let count = track.supply_v.iter().filter(|&&v| v == rail_v).count();
            // The interpolator's delay moves the borders by some samples of 20000.
            assert!((count as f64 / 20_000.0 - share).abs() < 0.004, "{rail_v}");
        }
    }

    #[test]
    fn hysteresis_spares_changes() {
        let samples: Vec<_> = (0..5000)
            .map(|n| Complex64::new(0.5 + 0.03 * (0.05 * f64::from(n)).sin(), 0.0))
            .collect();
        let changes = |track: &Track| {
            let pairs = track.supply_v[500..].windows(2);
            pairs.filter(|pair| pair[0] != pair[1]).count()
        };
        assert!(changes(&track(0.0, 0.0, &samples)) > 50);
        assert_eq!(changes(&track(0.1, 0.0, &samples)), 0);
    }

    #[test]
    fn a_change_settles_to_one_percent_in_the_stated_time() {
        let mut samples = vec![Complex64::new(0.9, 0.0); 500];
        samples.resize(1000, Complex64::new(0.1, 0.0));
        let track = track(0.0, 20e-6, &samples);
        let start = track.supply_v.iter().skip(400).position(|&v| v < 5.9);
        let start = start.unwrap() + 400 - 1;
        let left = |at: usize| (track.supply_v[at] - 1.5) / 4.5;
        // The step passes the middle rail for some samples of the interpolated edge.
        assert!(left(start + 20) < 0.05 && left(start + 30) < 0.01);
        assert!(left(start + 5) > 0.2);
    }
}
