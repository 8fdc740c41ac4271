//! Controls of a track whose supply is switched among rails: a change falls between two carrier cycles, and what lies
//! beside it is neither rounded nor made to ring.
//!
//! Between two instants without a change all controls run on straight lines; where an instant has parts, each part's
//! values hold for its own time.

use std::collections::VecDeque;
use std::f64::consts::TAU;

use num_complex::Complex64;

use super::controls::Border;
use crate::drive::{Track, TrackPart};

/// Width, supply and phase at a time.
#[derive(Debug, Clone, Copy)]
struct Point {
    control: [f64; 2],
    phase_rad: f64,
}

impl Point {
    fn new(control: f64, supply_v: f64, phase: Complex64) -> Self {
        Self {
            control: [control, supply_v],
            phase_rad: phase.arg(),
        }
    }
}

/// A stretch on straight lines, times in instants.
#[derive(Debug, Clone, Copy)]
struct Piece {
    from: f64,
    to: f64,
    ends: [Point; 2],
}

impl Piece {
    fn held(from: f64, to: f64, point: Point) -> Self {
        Self {
            from,
            to,
            ends: [point; 2],
        }
    }

    fn at(&self, time: f64) -> Border {
        let [start, end] = self.ends;
        let part = if self.to > self.from {
            (time - self.from) / (self.to - self.from)
        } else {
            0.0
        };
        let turn = end.phase_rad - start.phase_rad;
        let turn = turn - TAU * (turn / TAU).round();
        Border {
            control: [0, 1].map(|i| start.control[i] + part * (end.control[i] - start.control[i])),
            phase_rad: start.phase_rad + part * turn,
        }
    }
}

/// An instant with its parts, if it has any: their ends within it, -1/2 to 1/2.
#[derive(Debug, Clone)]
struct Instant {
    middle: Point,
    parts: Vec<(f64, Point)>,
}

/// Reads rails cycle by cycle.
#[derive(Debug, Clone)]
pub struct Rails {
    /// Instants in a cycle.
    step: f64,
    last: Option<Instant>,
    pieces: VecDeque<Piece>,
    taken: u64,
    cycle: u64,
}

impl Rails {
    /// Of a track at `rate_hz` on a carrier at `carrier_hz`.
    pub fn new(carrier_hz: f64, rate_hz: f64) -> Self {
        Self {
            step: rate_hz / carrier_hz,
            last: None,
            pieces: VecDeque::new(),
            taken: 0,
            cycle: 0,
        }
    }

    /// Takes the instants in `range` of `track`; `each` gets the borders of every cycle that they complete.
    pub fn push(
        &mut self,
        track: &Track,
        range: std::ops::Range<usize>,
        full_v: f64,
        mut each: impl FnMut(Border, Border),
    ) {
        let first = track.parts.partition_point(|part| part.at < range.start);
        let mut parts = track.parts.get(first..).unwrap_or(&[]);
        for at in range {
            let count = parts.iter().take_while(|part| part.at == at).count();
            let (own, later) = parts.split_at(count);
            parts = later;
            let supply_v = track.supply_v.get(at).copied().unwrap_or(full_v);
            self.instant(Instant {
                middle: Point::new(track.control[at], supply_v, track.phase[at]),
                parts: ends(own),
            });
            let known = (self.taken - 1) as f64;
            while (self.cycle + 1) as f64 * self.step <= known {
                let [start, end] = [self.cycle, self.cycle + 1].map(|n| n as f64 * self.step);
                let middle = 0.5 * (start + end);
                while self.pieces.len() > 1 && self.pieces[0].to <= middle {
                    self.pieces.pop_front();
                }
                if let Some(piece) = self.pieces.front() {
                    each(piece.at(start), piece.at(end));
                }
                self.cycle += 1;
            }
        }
    }

    /// Adds what lies between the last instant and this one.
    fn instant(&mut self, now: Instant) {
        let time = self.taken as f64;
        self.taken += 1;
        if let Some(last) = self.last.take() {
            let border = time - 0.5;
            if last.parts.is_empty() && now.parts.is_empty() {
                self.pieces.push_back(Piece {
                    from: time - 1.0,
                    to: time,
                    ends: [last.middle, now.middle],
                });
            } else {
                self.held(&last, time - 1.0, time - 1.0, border);
                self.held(&now, time, border, time);
            }
        }
        self.last = Some(now);
    }

    /// What holds from `from` to `to` around the instant at `time`.
    fn held(&mut self, instant: &Instant, time: f64, from: f64, to: f64) {
        if instant.parts.is_empty() {
            self.pieces.push_back(Piece::held(from, to, instant.middle));
            return;
        }
        let mut start = from;
        for (end, point) in &instant.parts {
            let end = (time + end).clamp(start, to);
            if end > start {
                self.pieces.push_back(Piece::held(start, end, *point));
                start = end;
            }
        }
    }
}

/// Where parts end within their instant. The last one ends with it.
fn ends(parts: &[TrackPart]) -> Vec<(f64, Point)> {
    let mut end = -0.5;
    let mut all: Vec<(f64, Point)> = parts
        .iter()
        .map(|part| {
            end += part.weight;
            (end, Point::new(part.control, part.supply_v, part.phase))
        })
        .collect();
    if let Some(last) = all.last_mut() {
        last.0 = 0.5;
    }
    all
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A ramp of the width with one change of the rail a quarter after instant 20.
    #[test]
    fn a_change_falls_where_it_is_between_two_cycles() {
        let mut track = Track::default();
        for at in 0..60 {
            let supply_v = if at <= 20 { 1.0 } else { 2.0 };
            track.control.push(0.2 + 0.001 * f64::from(at));
            track.phase.push(Complex64::ONE);
            track.supply_v.push(supply_v);
        }
        for (weight, control, supply_v) in [(0.75, 0.22, 1.0), (0.25, 0.11, 2.0)] {
            track.parts.push(TrackPart {
                at: 20,
                weight,
                control,
                phase: Complex64::ONE,
                supply_v,
            });
        }
        for ratio in [4.0, 40.0] {
            let mut rails = Rails::new(ratio, 1.0);
            let mut cycles = Vec::new();
            for from in [0, 25] {
                let to = if from == 0 { 25 } else { 60 };
                rails.push(&track, from..to, 5.0, |start, end| {
                    cycles.push((start, end))
                });
            }
            assert_eq!(cycles.len(), (59.0 * ratio) as usize);
            for (n, (start, end)) in cycles.iter().enumerate() {
                let t = (n as f64 + 0.5) / ratio;
                let supply_v = if t < 20.25 { 1.0 } else { 2.0 };
                assert!((start.control[1] - supply_v).abs() < 1e-12, "{t}");
                assert!((end.control[1] - supply_v).abs() < 1e-12, "{t}");
                if !(19.0..21.0).contains(&t) {
                    let width = 0.2 + 0.001 * n as f64 / ratio;
                    assert!((start.control[0] - width).abs() < 1e-12, "{t}");
                } else if (20.25..20.5).contains(&t) {
                    assert_eq!(start.control[0], 0.11);
                }
            }
        }
    }
}
