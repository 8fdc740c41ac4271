//! The scheme at work: edges to gate, gate to output.
//!
//! Every edge counts at its exact time ([`crate::math::edges`]). What the stage adds is that of [`Gating`]: a rising edge of size `a`
//! misses `a sum A exp(p t)` at first, a falling one keeps as much of its own sum. Transitions are added up, which is right
//! as long as each is over before the next begins; how many are not is counted.

use std::collections::VecDeque;

use num_complex::Complex64;

use super::pulses::Pulses;
use super::{BurstScheme, StopBand};
use crate::drive::phase::{PhaseLimiter, magnitude};
use crate::drive::width::Inverse;
use crate::drive::{Drawn, Track};
use crate::map::Map;
use crate::math::delay::{Delay, LATENCY};
use crate::math::edges::{EDGE_LATENCY, Responses};
use crate::math::modal::{MODAL_LATENCY, Modal};
use crate::orbit::{Gating, TransitionArea};
use crate::signal::Edge;

/// Instants by which the gate lags behind the magnitude: two that the cubic sees ahead, and the edges' own. The newest
/// value is `m(k + 2)` while the stretch from `k` to `k + 1` is done, after which sample `k + 1 - EDGE_LATENCY` is known.
const GATE_LATENCY: usize = 1 + EDGE_LATENCY;

/// Instants by which the rows of the drive's phase, and of the output in front of a filter, lag behind the times of the gate's edges.
pub(crate) const GATE_LAG: usize = LATENCY + GATE_LATENCY;

/// Instants by which a filter's output lags behind that.
pub(crate) const FILTER_LAG: usize = MODAL_LATENCY;

/// All latencies of the scheme beside its dead times.
pub(super) const LATEST: usize = GATE_LATENCY + MODAL_LATENCY;

/// What the gate did.
#[derive(Debug, Clone, Copy, PartialEq, Default, serde::Serialize)]
pub struct GateFigures {
    /// Edges so far.
    pub edges: u64,
    /// Edges that came before the transition of the last one was over.
    pub hurried: u64,
    /// Ticks at which noise shaping was overloaded.
    pub overloads: u64,
    /// Shortest time between two edges, s.
    pub shortest_s: f64,
    /// Until 1 % is left of a rise or a fall, the longer, s.
    pub transition_s: f64,
    /// What is left of a transition by the modes that stand for it, parts of it.
    pub fit: f64,
}

/// Where edges come from.
#[derive(Debug, Clone)]
enum Origin {
    Made(Pulses),
    /// The next edge of the file.
    Read(usize),
}

/// What the gate did over one instant.
#[derive(Debug, Clone, Copy, Default)]
struct Instant {
    /// Mean level.
    gate: f64,
    /// Mean square of the output over the full one, transitions included, each in whole at its edge.
    square: f64,
    drawn: Drawn,
}

/// Modes of rise or fall at work, each with its amount.
type Modes = Vec<(Complex64, Responses<Complex64>)>;

impl Instant {
    /// The gate stands at `gate`, drawing `power`, for the part `share` of the instant.
    fn hold(&mut self, gate: f64, power: Drawn, share: f64) {
        self.gate += share * gate;
        self.square += share * gate * gate;
        self.drawn.add(power, share);
    }
}

#[derive(Debug, Clone)]
pub(crate) struct BurstDrive<'a> {
    scheme: BurstScheme,
    map: &'a Map,
    inverse: Inverse,
    gating: Gating,
    level: f64,
    full: f64,
    full_v: Complex64,
    rate_hz: f64,
    wanted: Delay,
    magnitude: Delay,
    angle: Delay,
    phase: PhaseLimiter,
    /// The last four magnitudes, and the index of the newest.
    window: [f64; 4],
    newest: i64,
    origin: Origin,
    /// Edges made but not yet reached: time in samples, level.
    coming: VecDeque<(f64, f64)>,
    last_made: f64,
    steps: Responses<f64>,
    rise: Modes,
    fall: Modes,
    /// Of rise and fall.
    areas: [TransitionArea; 2],
    gate: f64,
    /// Drawn at the present gate.
    power: Drawn,
    last_edge: f64,
    figures: GateFigures,
    filter: Option<Modal>,
    passed: f64,
    /// Share of what does not pass that is not drawn, over the power that would be drawn for it.
    returned: f64,
    /// Waiting for the output.
    waiting: VecDeque<Instant>,
}

impl<'a> BurstDrive<'a> {
    pub(crate) fn new(scheme: &BurstScheme, map: &'a Map, level: f64, rate_hz: f64) -> Self {
        let end = map.turns_at().unwrap_or(map.domain().1);
        let full_v = map.output_held_v(end).0;
        let gating = scheme.gating(map.gating());
        let modes = |decays: &[crate::orbit::Decay]| -> Modes {
            decays
                .iter()
                .map(|decay| (decay.amount, Responses::decays(decay.pole_per_s / rate_hz)))
                .collect()
        };
        let behind = GATE_LATENCY + scheme.filter.map_or(0, |_| MODAL_LATENCY);
        let filter = scheme.filter.map(|filter| {
            let edge = std::f64::consts::PI * filter.bandwidth_hz / rate_hz;
            Modal::new(&filter.prototype(), edge)
        });
        let mut drive = Self {
            inverse: Inverse::new(map),
            map,
            level,
            full: map.domain().1,
            full_v,
            rate_hz,
            wanted: Delay::new(behind as f64),
            magnitude: Delay::new(scheme.delay_s * rate_hz),
            angle: Delay::new(scheme.phase_path.delay_s * rate_hz + GATE_LATENCY as f64),
            phase: PhaseLimiter::new(
                scheme.phase_path.order,
                scheme.phase_path.bandwidth_hz,
                rate_hz,
            ),
            window: [0.0; 4],
            newest: -1,
            origin: if scheme.pulses.is_some() {
                Origin::Read(0)
            } else {
                Origin::Made(Pulses::new(scheme, LATENCY as f64, rate_hz))
            },
            coming: VecDeque::new(),
            last_made: f64::NEG_INFINITY,
            steps: Responses::steps(),
            rise: modes(&gating.rise),
            fall: modes(&gating.fall),
            areas: [
                TransitionArea::of(&gating.rise),
                TransitionArea::of(&gating.fall),
            ],
            gate: 0.0,
            power: Drawn::default(),
            last_edge: f64::NEG_INFINITY,
            figures: GateFigures {
                shortest_s: f64::INFINITY,
                transition_s: gating.rise_s.max(gating.fall_s),
                fit: gating.fit,
                ..GateFigures::default()
            },
            filter,
            passed: scheme
                .filter
                .map_or(1.0, |filter| 10f64.powf(-filter.loss_db / 20.0)),
            returned: 0.0,
            waiting: VecDeque::from(vec![Instant::default(); behind - 2]),
            gating,
            scheme: scheme.clone(),
        };
        drive.power = drive.drawn(0.0);
        if scheme
            .filter
            .is_some_and(|filter| filter.stop_band == StopBand::Reflected)
        {
            let full_w = full_v.norm_sqr() / (2.0 * map.load_ohm());
            drive.returned = drive.drawn(1.0).stage_w / full_w;
        }
        drive
    }

    pub(crate) fn figures(&self) -> GateFigures {
        let mut figures = self.figures;
        if let Origin::Made(pulses) = &self.origin {
            figures.overloads = pulses.overloads();
        }
        figures
    }

    /// What the stage draws while the gate stands at `gate`.
    fn drawn(&self, gate: f64) -> Drawn {
        if gate <= 0.0 {
            return Drawn {
                stage_w: self.gating.off_w,
                driver_w: 0.0,
                ..Drawn::default()
            };
        }
        let width = self.inverse.width(gate);
        let supply_v = self
            .map
            .points()
            .last()
            .map_or(f64::NAN, |point| point.supply_v);
        Drawn {
            stage_w: supply_v * self.map.supply_held_a(width).unwrap_or(f64::NAN),
            driver_w: self.map.driver_held_w(width).unwrap_or(0.0),
            ..Drawn::default()
        }
    }

    /// Makes the edges of the stretch from instant `k` to the next.
    fn make(&mut self, k: i64) {
        let (scheme, rate_hz) = (&self.scheme, self.rate_hz);
        let coming = &mut self.coming;
        match &mut self.origin {
            Origin::Read(next) => {
                let Some(file) = &scheme.pulses else { return };
                while let Some(edge) = file.sequence.edges.get(*next) {
                    let time = (file.start_s + edge.time_s) * rate_hz + LATENCY as f64;
                    if time >= (k + 1) as f64 {
                        break;
                    }
                    coming.push_back((time.max(0.0), edge.level));
                    *next += 1;
                }
            }
            Origin::Made(pulses) => {
                let last = &mut self.last_made;
                let grid = scheme.grid_s.map(|grid_s| grid_s * rate_hz);
                let shortest = scheme.shortest_s * rate_hz;
                pulses.advance(k, &self.window, &mut |time, level| {
                    let at = match grid {
                        Some(grid) => {
                            ((time - LATENCY as f64) / grid - 1e-9).ceil() * grid + LATENCY as f64
                        }
                        None => time,
                    };
                    let at = at.max(*last + shortest);
                    *last = at;
                    coming.push_back((at, level));
                });
            }
        }
    }

    /// Carries out what falls into the instant from `k`: mean gate and power drawn over it.
    fn pass(&mut self, k: i64, track: &mut Track) -> Instant {
        let end = (k + 1) as f64;
        let mut from = k as f64;
        let mut done = Instant::default();
        while let Some(&(time, level)) = self.coming.front().filter(|edge| edge.0 < end) {
            self.coming.pop_front();
            let held = (time - from).max(0.0);
            done.hold(self.gate, self.power, held);
            from = from.max(time);
            let change = level - self.gate;
            if change == 0.0 {
                continue;
            }
            let (whole, part) = (time.floor(), time - time.floor());
            let whole = (whole as i64).max(k);
            self.steps.edge(whole, part, change.into());
            let squares = (level * level - self.gate * self.gate).abs();
            let (modes, sign, joule) = if change > 0.0 {
                (&mut self.rise, -1.0, self.gating.rise_j)
            } else {
                (&mut self.fall, 1.0, self.gating.fall_j)
            };
            for (amount, responses) in modes {
                responses.edge(whole, part, *amount * (sign * change.abs()));
            }
            done.drawn.stage_w += joule * squares * self.rate_hz;
            // The level that is left, crossed by the transition: (level - change modes)^2 - level^2.
            let area = self.areas[usize::from(change < 0.0)];
            done.square += self.rate_hz
                * (change * change * area.squared_s - 2.0 * level * change * area.straight_s);
            let since_s = (time - self.last_edge) / self.rate_hz;
            self.figures.edges += 1;
            self.figures.shortest_s = self.figures.shortest_s.min(since_s);
            self.figures.hurried += u64::from(since_s < self.figures.transition_s);
            self.last_edge = time;
            self.gate = level;
            self.power = self.drawn(level);
            track.gate.push(Edge {
                time_s: (time - LATENCY as f64) / self.rate_hz,
                level,
            });
        }
        done.hold(self.gate, self.power, end - from);
        done
    }

    pub(crate) fn push(&mut self, samples: &[Complex64], track: &mut Track) {
        let load_ohm = self.map.load_ohm();
        let full_w = self.full_v.norm_sqr() / (2.0 * load_ohm);
        for &sample in samples {
            let wanted = self.wanted.push(sample);
            let newest = self.level * magnitude(self.magnitude.push(sample));
            let phase = self.phase.push(self.angle.push(sample));
            self.window.rotate_left(1);
            self.window[3] = newest;
            self.newest += 1;
            let k = self.newest - 2;
            if k >= 0 {
                self.make(k);
                let done = self.pass(k, track);
                self.waiting.push_back(done);
            }
            let mut output = Complex64::ZERO;
            if self.newest >= GATE_LATENCY as i64 {
                let mut gate = self.steps.sample();
                for (_, responses) in self.rise.iter_mut().chain(&mut self.fall) {
                    gate += responses.sample();
                }
                output = self.full_v * phase * gate;
            }
            let (mut filtered, mut through_w) = (false, 0.0);
            if let Some(filter) = &mut self.filter {
                filtered = true;
                output = filter.push(output);
                through_w = output.norm_sqr() / (2.0 * load_ohm);
                output *= self.passed;
            }
            let Instant {
                gate,
                square,
                mut drawn,
            } = if k >= 0 {
                self.waiting.pop_front().unwrap_or_default()
            } else {
                Instant::default()
            };
            drawn.delivered_w = match (filtered, self.returned > 0.0) {
                (false, _) => output.norm_sqr() / (2.0 * load_ohm),
                // What the filter turns away is not taken in, or is taken in and burnt.
                (true, true) => through_w,
                (true, false) => square * full_w,
            };
            if filtered {
                drawn.stage_w -= self.returned * (square * full_w - through_w);
            }
            track.wanted.push(wanted);
            track
                .asked
                .push((self.level * magnitude(wanted)).min(1.0) * self.full);
            track.control.push(gate * self.full);
            track.phase.push(phase);
            track.output_v.push(output);
            track.drawn.push(drawn);
        }
    }
}
