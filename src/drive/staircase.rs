//! Pulses whose edges keep a time grid, one a carrier cycle, as a band-limited observer sees them.
//!
//! Many carrier cycles fall into one instant of a track. The edges that the scheme asks for run straight from instant to
//! instant; each cycle rounds them to the grid by itself; and the output, one value a cycle, is a staircase whose steps
//! stand at known cycles. They are taken at their exact places ([`crate::math::edges`]), so that no step folds, and finer
//! sampling changes nothing but the straight lines. What those lose of the smooth output is put back: the result is
//!
//! ```text
//! output of the edges as asked + seen(staircase) - seen(straight lines through the output as asked)
//! ```

use std::collections::VecDeque;
use std::f64::consts::TAU;

use num_complex::Complex64;

use crate::map::Map;
use crate::math::edges::{EDGE_LATENCY, Responses, Straight};
use crate::stage::Anchor;

/// Widths of the grid whose output is kept ready.
const MOST_WIDTHS: usize = 1 << 16;

/// A pulse in its cycle, parts of the period.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Pulse {
    /// Its width.
    pub width: f64,
    /// Where the edge or middle lies that the anchor names, within half a period of 0.
    pub place: f64,
}

impl Pulse {
    fn edges(self, anchor: Anchor) -> [f64; 2] {
        let first = match anchor {
            Anchor::Leading => self.place,
            Anchor::Centre => self.place - 0.5 * self.width,
            Anchor::Trailing => self.place - self.width,
        };
        [first, first + self.width]
    }

    pub(super) fn of_edges([first, second]: [f64; 2], anchor: Anchor) -> Self {
        Self {
            width: second - first,
            place: match anchor {
                Anchor::Leading => first,
                Anchor::Centre => 0.5 * (first + second),
                Anchor::Trailing => second,
            },
        }
    }
}

/// The grid at work.
#[derive(Debug, Clone)]
pub(super) struct Staircase<'a> {
    map: &'a Map,
    anchor: Anchor,
    /// Part of the period.
    grid: f64,
    /// Carrier cycles an instant.
    cycles: f64,
    /// Output at every width of the grid.
    widths: Vec<Complex64>,
    steps: Responses<f64>,
    straight: Straight,
    smooth: VecDeque<Complex64>,
    last: Option<[f64; 2]>,
    instant: i64,
    now: Option<[i64; 2]>,
    level: Complex64,
}

/// Instants by which the output lags.
pub(super) const STAIRCASE_LATENCY: usize = EDGE_LATENCY;

impl<'a> Staircase<'a> {
    /// A grid of `grid` parts of the period, at `cycles` carrier cycles an instant.
    pub(super) fn new(map: &'a Map, anchor: Anchor, grid: f64, cycles: f64) -> Self {
        let most = (map.domain().1 / grid).ceil() as usize + 2;
        let mut staircase = Self {
            map,
            anchor,
            grid,
            cycles,
            widths: Vec::new(),
            steps: Responses::steps(),
            straight: Straight::default(),
            smooth: VecDeque::from(vec![Complex64::ZERO; STAIRCASE_LATENCY]),
            last: None,
            instant: -1,
            now: None,
            level: Complex64::ZERO,
        };
        if most <= MOST_WIDTHS {
            staircase.widths = (0..most)
                .map(|steps| staircase.output(steps as i64))
                .collect();
        }
        staircase
    }

    /// Output at a width of `steps` of the grid, its place aside.
    fn output(&self, steps: i64) -> Complex64 {
        if steps <= 0 {
            // No pulse.
            return Complex64::ZERO;
        }
        match self.widths.get(steps as usize) {
            Some(output) => *output,
            None => self.map.output_held_v(steps as f64 * self.grid).0,
        }
    }

    /// Output of a pulse whose edges stand at these multiples of the grid.
    fn on_grid(&self, [first, second]: [i64; 2]) -> Complex64 {
        let edges = [first as f64 * self.grid, second as f64 * self.grid];
        let place = Pulse::of_edges(edges, self.anchor).place;
        self.output(second - first) * Complex64::cis(-TAU * place)
    }

    fn rounded(&self, edges: [f64; 2]) -> [i64; 2] {
        edges.map(|edge| (edge / self.grid).round() as i64)
    }

    /// Takes the pulse asked for at the next instant, and `smooth`, its output; gives the output seen
    /// [`STAIRCASE_LATENCY`] instants ago.
    pub(super) fn push(&mut self, pulse: Pulse, smooth: Complex64) -> Complex64 {
        self.instant += 1;
        let to = pulse.edges(self.anchor);
        if let Some(from) = self.last {
            // The same pulse may be counted from the next cycle: the nearer one is meant.
            let turns = (to[0] - from[0]).round();
            self.stretch(from, to.map(|edge| edge - turns));
        } else {
            self.now = Some(self.rounded(to));
            self.level = self.on_grid(self.rounded(to));
            self.steps.start(self.level);
        }
        self.last = Some(to);
        self.smooth.push_back(smooth);
        let seen = self.straight.push(smooth);
        let smooth = self.smooth.pop_front().unwrap_or_default();
        if self.instant < STAIRCASE_LATENCY as i64 {
            return smooth;
        }
        smooth + self.steps.advance() - seen
    }

    /// The cycles of the stretch that ends at the present instant.
    fn stretch(&mut self, from: [f64; 2], to: [f64; 2]) {
        let start = (self.instant - 1) as f64;
        let mut cycle = (start * self.cycles).ceil();
        let end = (self.instant as f64 * self.cycles).ceil();
        while cycle < end {
            let time = cycle / self.cycles;
            let part = (time - start).clamp(0.0, 1.0 - 1e-12);
            let at = [0, 1].map(|i| from[i] + (to[i] - from[i]) * part);
            let rounded = self.rounded(at);
            if self.now != Some(rounded) {
                let level = self.on_grid(rounded);
                self.steps.edge(self.instant - 1, part, level - self.level);
                self.level = level;
                self.now = Some(rounded);
            }
            // The next cycle at which one of the edges has come half a step further.
            let next = [0, 1]
                .map(|i| {
                    let slope = to[i] - from[i];
                    let half = 0.5 * slope.signum();
                    let border = (rounded[i] as f64 + half) * self.grid;
                    if slope == 0.0 {
                        f64::INFINITY
                    } else {
                        ((start + (border - from[i]) / slope) * self.cycles).ceil()
                    }
                })
                .into_iter()
                .fold(f64::INFINITY, f64::min);
            cycle = next.max(cycle + 1.0);
        }
    }
}
