//! Scheme `width`: one pulse a carrier cycle, its width from the magnitude, its place from the phase.
//!
//! The time grid is locked to the carrier: edges fall on multiples of it counted from the start of each cycle, and every
//! cycle counts ([`super::staircase`]). Jitter is independent from edge to edge; what an instant of the track sees is its
//! mean over the cycles that fall into it.

use std::collections::VecDeque;

use num_complex::Complex64;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use std::f64::consts::{PI, TAU};

use super::Track;
use super::correct::{Correction, Correctors};
use super::phase::{PhaseLimiter, magnitude};
use super::rate::{RateReason, band};
use super::staircase::{Pulse, STAIRCASE_LATENCY, Staircase};
use super::supply::{PhasePath, settling};
use crate::map::Map;
use crate::math::delay::Delay;
use crate::stage::Anchor;

/// From the wanted magnitude to the width.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum WidthLaw {
    /// The width whose output has the wanted amplitude; the pulse is shifted by the phase that the stage adds.
    Inverse,
    /// The width whose output has the wanted amplitude; the phase stays as the stage bends it.
    Amplitude,
    /// `asin(m sin(pi d)) / pi` for full width `d`: exact for rectangular pulses, uncorrected for all else.
    Sine,
}

impl WidthLaw {
    /// The width for the wanted part `m` of full output, 0 to 1, at full width `full`.
    pub(super) fn width(self, inverse: &Inverse, full: f64, m: f64) -> f64 {
        match self {
            Self::Inverse | Self::Amplitude => inverse.width(m),
            Self::Sine => (m.min(1.0) * (PI * full).sin()).asin() / PI,
        }
    }
}

/// The scheme as the study describes it.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct WidthScheme {
    /// From the wanted magnitude to the width.
    pub law: WidthLaw,
    /// Which edge stays, where it is not as the stage says.
    #[serde(skip)]
    pub anchor: Option<Anchor>,
    /// Grid of the edges, s.
    pub grid_s: Option<f64>,
    /// Shortest pulse, s: shorter ones are held there.
    pub shortest_s: f64,
    /// RMS jitter of each edge, s.
    pub jitter_s: f64,
    /// Seed of the jitter.
    pub seed: u64,
    /// Dead time from the magnitude to the width, s.
    pub delay_s: f64,
    /// What makes the drive's phase.
    pub phase_path: PhasePath,
}

impl WidthScheme {
    /// The same with edges that fall anywhere: for those who place every edge themselves.
    #[must_use]
    pub fn without_timing(mut self) -> Self {
        (self.grid_s, self.jitter_s) = (None, 0.0);
        self
    }

    pub(super) fn settling(&self, rate_hz: f64) -> usize {
        STAIRCASE_LATENCY
            + settling(
                self.delay_s.max(self.phase_path.delay_s),
                &[self.phase_path.bandwidth_hz],
                rate_hz,
            )
    }

    pub(super) fn rates(&self, signal_rate_hz: f64) -> Vec<(f64, RateReason)> {
        let steps = if self.grid_s.is_some() { 16.0 } else { 0.0 };
        vec![
            (steps * signal_rate_hz, RateReason::Edges),
            (
                band(self.phase_path.bandwidth_hz, signal_rate_hz),
                RateReason::PhaseBandwidth,
            ),
        ]
    }
}

/// Widths and phases of a map over equal steps of amplitude: the inverse, quick enough for every instant.
#[derive(Debug, Clone)]
pub(crate) struct Inverse {
    width: Vec<f64>,
}

/// Steps of the inverse.
const STEPS: usize = 4096;

impl Inverse {
    /// Of the first rising stretch of `map`. Below its lowest amplitude the width is the lowest one.
    pub(crate) fn new(map: &Map) -> Self {
        let end = map.turns_at().unwrap_or(map.domain().1);
        let start = map.domain().0;
        let full_v = map.amplitude_held_v(end);
        let amplitude = |width: f64| map.amplitude_held_v(width);
        let width = (0..=STEPS)
            .map(|step| {
                let target_v = full_v * step as f64 / STEPS as f64;
                // Bisection: the curve rises, and 60 halvings reach the last digit.
                let (mut low, mut high) = (start, end);
                for _ in 0..60 {
                    let middle = 0.5 * (low + high);
                    if amplitude(middle) < target_v {
                        low = middle;
                    } else {
                        high = middle;
                    }
                }
                0.5 * (low + high)
            })
            .collect();
        Self { width }
    }

    /// The width for the part `m` of the highest amplitude, linear between steps.
    pub(crate) fn width(&self, m: f64) -> f64 {
        let at = (m.clamp(0.0, 1.0)) * STEPS as f64;
        let step = (at as usize).min(STEPS - 1);
        let rest = at - step as f64;
        self.width[step] * (1.0 - rest) + self.width[step + 1] * rest
    }
}

/// The grid at work, and what waits for its output.
#[derive(Debug, Clone)]
struct Gridded<'a> {
    staircase: Staircase<'a>,
    waiting: VecDeque<Waiting>,
}

/// One instant of the other rows.
#[derive(Debug, Clone, Copy, Default)]
struct Waiting {
    wanted: Complex64,
    asked: f64,
    control: f64,
    phase: Complex64,
    /// What jitter adds to the output, V.
    jitter_v: Complex64,
}

/// The scheme at work at one sample rate.
#[derive(Debug, Clone)]
pub(super) struct WidthDrive<'a> {
    scheme: WidthScheme,
    map: &'a Map,
    inverse: Inverse,
    anchor: Anchor,
    level: f64,
    full: f64,
    wanted: Delay,
    magnitude: Delay,
    angle: Delay,
    phase: PhaseLimiter,
    /// Phase that the stage adds at full width, rad.
    full_rad: f64,
    grid: Option<Gridded<'a>>,
    /// Shortest pulse as a part of a cycle; jitter likewise, averaged over the cycles of an instant.
    shortest: f64,
    jitter: f64,
    random: ChaCha8Rng,
    correctors: Option<Correctors>,
}

impl<'a> WidthDrive<'a> {
    pub(super) fn new(
        scheme: &WidthScheme,
        map: &'a Map,
        anchor: Anchor,
        level: f64,
        rate_hz: f64,
    ) -> Self {
        let carrier_hz = map.frequency_hz();
        let cycles = (carrier_hz / rate_hz).max(1.0);
        let full = map.domain().1;
        Self {
            scheme: *scheme,
            map,
            inverse: Inverse::new(map),
            anchor: scheme.anchor.unwrap_or(anchor),
            level,
            full,
            wanted: Delay::new(0.0),
            magnitude: Delay::new(scheme.delay_s * rate_hz),
            angle: Delay::new(scheme.phase_path.delay_s * rate_hz),
            phase: PhaseLimiter::new(
                scheme.phase_path.order,
                scheme.phase_path.bandwidth_hz,
                rate_hz,
            ),
            full_rad: map.phase_at_rad(full).unwrap_or(0.0),
            grid: scheme.grid_s.map(|grid_s| Gridded {
                staircase: Staircase::new(
                    map,
                    scheme.anchor.unwrap_or(anchor),
                    grid_s * carrier_hz,
                    carrier_hz / rate_hz,
                ),
                waiting: VecDeque::from(vec![Waiting::default(); STAIRCASE_LATENCY]),
            }),
            shortest: scheme.shortest_s * carrier_hz,
            jitter: scheme.jitter_s * carrier_hz / cycles.sqrt(),
            random: ChaCha8Rng::seed_from_u64(scheme.seed),
            correctors: None,
        }
    }

    /// The same with `correction` in front, at `factor` times the signal's rate: it hands the law another magnitude.
    #[must_use]
    pub(super) fn corrected(mut self, correction: &Correction, factor: usize) -> Self {
        self.correctors = Some(Correctors::new(correction, factor));
        self
    }

    /// The width for the wanted part `m` of full output.
    fn width(&self, m: f64) -> f64 {
        self.scheme.law.width(&self.inverse, self.full, m)
    }

    /// The pulse once its edges are jittered.
    fn jittered(&mut self, pulse: Pulse) -> Pulse {
        let from = match self.anchor {
            Anchor::Leading => 0.0,
            Anchor::Centre => -0.5 * pulse.width,
            Anchor::Trailing => -pulse.width,
        };
        let mut edges = [pulse.place + from, pulse.place + from + pulse.width];
        for edge in &mut edges {
            let normal: f64 = StandardNormal.sample(&mut self.random);
            *edge += self.jitter * normal;
        }
        Pulse::of_edges(edges, self.anchor)
    }

    /// Output of a pulse, V.
    fn output_v(&self, pulse: Pulse) -> Complex64 {
        let width = pulse.width.min(self.full);
        self.map.output_held_v(width).0 * Complex64::cis(-TAU * pulse.place)
    }

    pub(super) fn push(&mut self, samples: &[Complex64], track: &mut Track) {
        for &sample in samples {
            let wanted = self.wanted.push(sample);
            let delayed = self.magnitude.push(sample);
            let angle = self.angle.push(sample);
            let plain = self.width(self.level * magnitude(wanted));
            let (part, angle) = match &mut self.correctors {
                None => (self.level * magnitude(delayed), angle),
                Some(correctors) => correctors.push(delayed, angle, self.level),
            };
            let width = self.width(part);
            let (asked, width) = match self.correctors {
                None => (plain, width),
                // Words of its lowest entries are rounded to both sides of the map's end.
                Some(_) => (width, width.max(self.map.domain().0)),
            };
            let width = width.max(self.shortest).min(self.full);
            let mut phase = self.phase.push(angle);
            if self.scheme.law == WidthLaw::Inverse {
                let added = self.map.phase_held_rad(width) - self.full_rad;
                phase *= Complex64::from_polar(1.0, -added);
            }
            // A phase that leads is a pulse that comes earlier.
            let pulse = Pulse {
                width,
                place: -phase.arg() / TAU,
            };
            let moved = if self.jitter > 0.0 {
                self.jittered(pulse)
            } else {
                pulse
            };
            let row = Waiting {
                wanted,
                asked,
                control: moved.width.min(self.full),
                phase: if self.jitter > 0.0 {
                    Complex64::cis(-TAU * moved.place)
                } else {
                    phase
                },
                jitter_v: if self.jitter > 0.0 && self.grid.is_some() {
                    self.output_v(moved) - self.output_v(pulse)
                } else {
                    Complex64::ZERO
                },
            };
            let smooth_v = match self.grid {
                Some(_) => self.output_v(pulse),
                None => Complex64::ZERO,
            };
            let row = match &mut self.grid {
                None => row,
                Some(gridded) => {
                    gridded.waiting.push_back(row);
                    let row = gridded.waiting.pop_front().unwrap_or_default();
                    let output_v = gridded.staircase.push(pulse, smooth_v);
                    track.output_v.push(output_v + row.jitter_v);
                    row
                }
            };
            track.wanted.push(row.wanted);
            track.asked.push(row.asked);
            track.control.push(row.control);
            track.phase.push(row.phase);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::map::{Control, MapPoint, Origin};
    use crate::math::delay::LATENCY;

    /// A stage of rectangular pulses whose phase bends with the width.
    fn map() -> Map {
        let points = (1..=400).map(|at| {
            let width = 0.5 * f64::from(at) / 400.0;
            MapPoint {
                control: width,
                output_v: Complex64::from_polar(8.0 * (PI * width).sin(), 0.4 + width),
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
        Map::new(Control::Width, Origin::Stage, 1e8, 50.0, points.collect()).unwrap()
    }

    fn scheme(law: WidthLaw) -> WidthScheme {
        WidthScheme {
            law,
            anchor: None,
            grid_s: None,
            shortest_s: 0.0,
            jitter_s: 0.0,
            seed: 1,
            delay_s: 0.0,
            phase_path: PhasePath::default(),
        }
    }

    fn signal() -> Vec<Complex64> {
        (0..3000)
            .map(|n| {
                let t = 0.01 * f64::from(n);
                Complex64::from_polar(0.5 + 0.4 * t.sin(), 1.3 * t)
            })
            .collect()
    }

    fn run(scheme: &WidthScheme, map: &Map) -> Track {
        let mut track = Track::default();
        WidthDrive::new(scheme, map, Anchor::Centre, 0.9, 1e6).push(&signal(), &mut track);
        track
    }

    #[test]
    fn the_inverse_undoes_amplitude_and_phase() {
        let map = map();
        let track = run(&scheme(WidthLaw::Inverse), &map);
        let turn = Complex64::from_polar(7.2, 0.9);
        for (n, sample) in signal().iter().enumerate().take(3000 - LATENCY) {
            let at = n + LATENCY;
            let output = map.output_held_v(track.control[at]).0 * track.phase[at];
            // 400 points of the map and 4096 of its inverse: the rest of two interpolations.
            assert!((output / turn - sample).norm() < 2e-5, "{n}");
        }
    }

    #[test]
    fn the_sine_law_is_the_inverse_of_rectangular_pulses() {
        let map = map();
        let (sine, inverse) = (
            run(&scheme(WidthLaw::Sine), &map),
            run(&scheme(WidthLaw::Amplitude), &map),
        );
        for at in LATENCY..3000 {
            assert!((sine.control[at] - inverse.control[at]).abs() < 1e-5);
        }
    }

    #[test]
    fn jitter_has_the_stated_variance() {
        let map = map();
        let mut jittered = scheme(WidthLaw::Sine);
        jittered.jitter_s = 20e-12;
        let (clean, noisy) = (run(&scheme(WidthLaw::Sine), &map), run(&jittered, &map));
        let count = (3000 - LATENCY) as f64;
        let square: f64 = (LATENCY..3000)
            .map(|at| (noisy.control[at] - clean.control[at]).powi(2))
            .sum();
        // Two edges, averaged over 100 cycles of the carrier an instant.
        let law = 20e-12 * 1e8 * (2.0f64 / 100.0).sqrt();
        // 3000 instants: 1.3 % of the RMS to one standard deviation.
        assert!(((square / count).sqrt() / law - 1.0).abs() < 0.06);
        assert_eq!(noisy, run(&jittered, &map));
    }
    /// Cycle by cycle, the naive twin: edges between instants on the straight line, rounded one by one, and their mean
    /// over each instant's own half to both sides.
    #[test]
    fn a_grid_counts_every_cycle() {
        let map = map();
        let mut coarse = scheme(WidthLaw::Sine);
        coarse.grid_s = Some(50e-12);
        // A slow signal: what lies far below the rate passes the observer and the mean alike.
        let samples: Vec<_> = (0..60_000)
            .map(|n| {
                let t = 2e-4 * f64::from(n);
                Complex64::from_polar(0.5 + 0.4 * t.sin(), 0.2 * (1.3 * t).sin())
            })
            .collect();
        let mut track = Track::default();
        WidthDrive::new(&coarse, &map, Anchor::Centre, 0.9, 1e6).push(&samples, &mut track);
        let smooth = |n: usize| {
            let w = track.control[n];
            let place = -track.phase[n].arg() / TAU;
            [place - 0.5 * w, place + 0.5 * w]
        };
        let (mut error, mut size, mut rough) = (0.0f64, 0.0f64, 0.0f64);
        let block = 400;
        for start in (2000..50_000).step_by(block) {
            let (mut naive, mut got, mut asked) =
                (Complex64::ZERO, Complex64::ZERO, Complex64::ZERO);
            for n in start..start + block {
                got += track.output_v[n] / block as f64;
                let (a, b) = (smooth(n), smooth(n + 1));
                asked += map.output_held_v(a[1] - a[0]).0
                    * Complex64::cis(-TAU * 0.5 * (a[0] + a[1]))
                    / block as f64;
                // A hundred cycles an instant.
                for cycle in 0..100 {
                    let part = f64::from(cycle) / 100.0;
                    let edges =
                        [0, 1].map(|i| ((a[i] + (b[i] - a[i]) * part) / 0.005).round() * 0.005);
                    naive += map.output_held_v(edges[1] - edges[0]).0
                        * Complex64::cis(-TAU * 0.5 * (edges[0] + edges[1]))
                        / (100 * block) as f64;
                }
            }
            error = error.max((got - naive).norm());
            rough = rough.max((asked - naive).norm());
            size = size.max(naive.norm());
        }
        // The blocks' own ends: one instant of 400 seen with a step to its side.
        assert!(
            error < 0.05 * rough && error < 2e-4 * size,
            "{error:e} {rough:e} {size}"
        );
    }
}
