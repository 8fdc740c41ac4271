//! Gates and lists of edges: when something is on, cycle by cycle.

use std::f64::consts::TAU;
use std::iter::Peekable;

use super::edges::{Interval, OPEN, Switches};

/// What is on from one edge to the next, read cycle by cycle. Edges are carrier angles from the start of the first cycle,
/// rad, rising, each with what holds from there on.
#[derive(Debug, Clone)]
pub struct Gate<I: Iterator<Item = (f64, bool)>> {
    edges: Peekable<I>,
    on: bool,
    cycle: u64,
}

impl<I: Iterator<Item = (f64, bool)>> Gate<I> {
    /// A gate that is off before the first of `edges`.
    pub fn new(edges: I) -> Self {
        Self {
            edges: edges.peekable(),
            on: false,
            cycle: 0,
        }
    }

    /// The stretches of the next cycle in which it is on, rad from its start, into `windows`.
    pub fn cycle(&mut self, windows: &mut Vec<[f64; 2]>) {
        windows.clear();
        let start = TAU * self.cycle as f64;
        let mut from = 0.0;
        while let Some((at, on)) = self
            .edges
            .next_if(|(at, _)| at.is_nan() || *at < start + TAU)
        {
            // An edge that is no number, or before its forerunner, counts where that was.
            let at = (at - start).clamp(from, TAU).max(from);
            if self.on && at > from {
                windows.push([from, at]);
            }
            (from, self.on) = (at, on);
        }
        if self.on && from < TAU {
            windows.push([from, TAU]);
        }
        self.cycle += 1;
    }
}

/// `intervals` with all switches open outside `on`, into `gated`.
pub fn gated(intervals: &[Interval], on: &[[f64; 2]], gated: &mut Vec<Interval>) {
    gated.clear();
    let mut push = |topology, length_rad: f64| {
        if length_rad > 0.0 {
            gated.push(Interval {
                topology,
                length_rad,
            });
        }
    };
    let mut from = 0.0;
    let mut windows = on.iter().peekable();
    for interval in intervals {
        let end = from + interval.length_rad;
        let mut at = from;
        while at < end {
            let Some(&&[open, close]) = windows.peek() else {
                push(OPEN, end - at);
                break;
            };
            if close <= at {
                windows.next();
                continue;
            }
            let off_until = open.clamp(at, end);
            push(OPEN, off_until - at);
            let on_until = close.clamp(off_until, end);
            push(interval.topology, on_until - off_until);
            at = on_until;
        }
        from = end;
    }
}

/// Appends what lies of `intervals` within `window`, rad from the cycle's start. The last interval ends with the cycle.
pub fn cut(intervals: &[Interval], window: [f64; 2], pieces: &mut Vec<Interval>) {
    let [mut at, to] = window;
    let mut end = 0.0;
    for (index, interval) in intervals.iter().enumerate() {
        end += interval.length_rad;
        if index + 1 == intervals.len() {
            end = TAU;
        }
        let until = end.min(to);
        if until > at {
            pieces.push(Interval {
                topology: interval.topology,
                length_rad: until - at,
            });
            at = until;
        }
    }
}

/// The intervals of a cycle whose pulse is high in `high` and low elsewhere.
pub fn pulsed(switches: &Switches, high: &[[f64; 2]], intervals: &mut Vec<Interval>) {
    intervals.clear();
    let mut push = |topology, length_rad: f64| {
        if length_rad > 0.0 {
            intervals.push(Interval {
                topology,
                length_rad,
            });
        }
    };
    let mut at = 0.0;
    for [from, to] in high {
        push(switches.low, from - at);
        push(switches.high, to - from);
        at = *to;
    }
    push(switches.low, TAU - at);
}

#[cfg(test)]
mod tests {
    use super::*;

    fn piece(topology: usize, length_rad: f64) -> Interval {
        Interval {
            topology,
            length_rad,
        }
    }

    #[test]
    fn a_gate_is_cut_at_the_borders_of_cycles() {
        let edges = [(1.0, true), (2.0, false), (5.0, true), (2.5 * TAU, false)];
        let mut gate = Gate::new(edges.into_iter());
        let mut windows = Vec::new();
        let mut all = Vec::new();
        for _ in 0..4 {
            gate.cycle(&mut windows);
            all.push(windows.clone());
        }
        assert_eq!(all[0], [[1.0, 2.0], [5.0, TAU]]);
        assert_eq!(all[1], [[0.0, TAU]]);
        assert_eq!(all[2].len(), 1);
        assert!(all[2][0][0] == 0.0 && (all[2][0][1] - 0.5 * TAU).abs() < 1e-12);
        assert!(all[3].is_empty());
    }

    #[test]
    fn pulses_are_cut_by_the_gate_and_the_cycle_stays_whole() {
        let intervals = [piece(1, 1.5), piece(0, 3.0), piece(1, TAU - 4.5)];
        let mut out = Vec::new();
        gated(&intervals, &[[1.0, 2.0], [4.0, 5.0]], &mut out);
        let mut closed = 0.0;
        let mut at = 0.0;
        for interval in &out {
            if interval.topology == 1 {
                let near = at + 1e-12;
                let inside = (1.0..1.5).contains(&near) || (4.5..5.0).contains(&near);
                assert!(inside, "{out:?}");
                closed += interval.length_rad;
            }
            at += interval.length_rad;
        }
        assert!((closed - 1.0).abs() < 1e-12 && (at - TAU).abs() < 1e-12);
        gated(&intervals, &[], &mut out);
        assert!(out.iter().all(|interval| interval.topology == OPEN));
        gated(&intervals, &[[0.0, TAU]], &mut out);
        assert_eq!(out.len(), 3);
    }
}
