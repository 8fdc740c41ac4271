//! From the controls of a carrier cycle to intervals of constant topology.
//!
//! The switch closes at carrier angles `x` with `x = c(x) + 2 pi k` and opens at `x = o(x) + 2 pi k`; both edges are
//! linear in time within the cycle, so that each instant is one division.

use std::f64::consts::TAU;

use super::error::ReplayError;
use crate::orbit::Drive;
use crate::stage::Stage;

/// The least by which an edge's own angle may move against the carrier, as a part of it: edges keep their order.
pub const SLOWEST: f64 = 0.05;

/// The most by which it may move, as a part of the carrier's own angle.
const FASTEST: f64 = 3.0;

/// Number of the topology with all switches open.
pub const OPEN: usize = 0;

/// A stretch of constant topology.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Interval {
    /// Which equations hold: 0 with all switches open, 1 with the only or the upper one closed, 2 with the lower one
    /// of a pair closed.
    pub topology: usize,
    /// How long, as an angle of the carrier, rad.
    pub length_rad: f64,
}

/// What a pulse does to the switches of a stage.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Switches {
    /// Topology while the pulse is high.
    pub high: usize,
    /// Topology while it is low.
    pub low: usize,
    /// For how long all switches are open around each edge, half of it to each side, rad.
    pub dead_rad: f64,
}

impl Switches {
    /// Those of `stage`.
    pub fn of(stage: &Stage) -> Self {
        if stage.is_pair() {
            Self {
                high: 1,
                low: 2,
                dead_rad: TAU * stage.frequency_hz * stage.driver.dead_s,
            }
        } else {
            Self {
                high: 1,
                low: OPEN,
                dead_rad: 0.0,
            }
        }
    }
}

/// What the drive does within one carrier cycle.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Pulse {
    /// All switches stay open.
    Off,
    /// The switch closes and opens, both edges linear in time.
    Edges {
        /// Where it closes, as the edge stands at start and end of the cycle, rad.
        closing_rad: [f64; 2],
        /// Where it opens, likewise; between `closing_rad` and `closing_rad + 2 pi`.
        opening_rad: [f64; 2],
    },
}

impl Pulse {
    /// The pulse of `drive`, its phase moving from `phase_rad` by `change_rad`. A phase that leads is a pulse that
    /// comes earlier.
    pub fn phased(drive: &Drive, phase_rad: f64, change_rad: f64) -> Self {
        Self::between(drive, drive, phase_rad, change_rad)
    }

    /// A pulse that moves from the width of `start` to that of `end` while its phase moves by `change_rad`.
    pub fn between(start: &Drive, end: &Drive, phase_rad: f64, change_rad: f64) -> Self {
        let end_rad = phase_rad + change_rad;
        Self::Edges {
            closing_rad: [start.closing_rad - phase_rad, end.closing_rad - end_rad],
            opening_rad: [
                start.closing_rad + start.width_rad - phase_rad,
                end.closing_rad + end.width_rad - end_rad,
            ],
        }
    }
}

/// Where edges really fall.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Timing {
    /// Edges lie on multiples of this angle from the start of each cycle, rad; 0 for none.
    pub grid_rad: f64,
    /// RMS jitter of each edge, rad.
    pub jitter_rad: f64,
    /// Seed of the jitter.
    pub seed: u64,
}

impl Timing {
    /// The `number`-th edge of a cycle, `ideal_rad` after its start.
    fn place(&self, ideal_rad: f64, cycle: u64, number: usize) -> f64 {
        let mut at = ideal_rad;
        if self.grid_rad > 0.0 {
            at = (at / self.grid_rad).round() * self.grid_rad;
        }
        if self.jitter_rad > 0.0 {
            at += self.jitter_rad * normal(self.seed, 16 * cycle + number as u64);
        }
        at
    }
}

/// The most intervals of one cycle: seven edges at the fastest pace, dead time around each.
const MOST: usize = 16;

/// The intervals of one cycle.
#[derive(Debug, Clone)]
pub struct Intervals {
    all: [Interval; MOST],
    count: usize,
}

impl Default for Intervals {
    fn default() -> Self {
        Self {
            all: [Interval::default(); MOST],
            count: 0,
        }
    }
}

impl Intervals {
    /// What was planned last.
    #[inline]
    pub fn as_slice(&self) -> &[Interval] {
        &self.all[..self.count]
    }

    #[inline]
    fn push(&mut self, topology: usize, length_rad: f64) {
        if length_rad > 0.0 && self.count < MOST {
            self.all[self.count] = Interval {
                topology,
                length_rad,
            };
            self.count += 1;
        }
    }

    /// Plans cycle number `cycle`.
    ///
    /// # Errors
    /// [`ReplayError`] where an edge runs too fast, or a width is out of range.
    #[inline]
    pub fn plan(
        &mut self,
        pulse: &Pulse,
        switches: &Switches,
        timing: Option<&Timing>,
        cycle: u64,
    ) -> Result<(), ReplayError> {
        self.count = 0;
        let Pulse::Edges {
            closing_rad,
            opening_rad,
        } = pulse
        else {
            self.push(OPEN, TAU);
            return Ok(());
        };
        let width = [
            opening_rad[0] - closing_rad[0],
            opening_rad[1] - closing_rad[1],
        ];
        if !width.iter().all(|&width| (0.0..=TAU).contains(&width)) {
            return Err(ReplayError::Width {
                cycle,
                given_rad: width,
            });
        }
        let closing_pace = 1.0 - (closing_rad[1] - closing_rad[0]) / TAU;
        let opening_pace = 1.0 - (opening_rad[1] - opening_rad[0]) / TAU;
        for pace in [closing_pace, opening_pace] {
            if !(SLOWEST..=FASTEST).contains(&pace) {
                return Err(ReplayError::EdgeTooFast {
                    cycle,
                    moved_rad: TAU * (1.0 - pace),
                    allowed_rad: TAU * (1.0 - SLOWEST),
                });
            }
        }
        let since_closing = (-closing_rad[0]).rem_euclid(TAU);
        let (to_closing, to_opening) = (1.0 / closing_pace, 1.0 / opening_pace);
        let mut high = since_closing < width[0];
        // Drive angles of the next closing and the next opening, counted from the start of the cycle.
        let mut closing = TAU - since_closing;
        let mut opening = width[0] - since_closing;
        let before = if high {
            -since_closing * to_closing
        } else {
            opening * to_opening
        };
        if !high {
            opening += TAU;
        }
        let half_dead = 0.5 * switches.dead_rad;
        let mut dead_until = before + half_dead;
        let (mut at, mut number) = (0.0, 0);
        loop {
            if dead_until > at {
                let to = dead_until.min(TAU);
                self.push(OPEN, to - at);
                at = to;
            }
            let ideal = if high {
                opening * to_opening
            } else {
                closing * to_closing
            };
            let topology = if high { switches.high } else { switches.low };
            if ideal - half_dead >= TAU {
                self.push(topology, TAU - at);
                return Ok(());
            }
            let placed = match timing {
                None => ideal,
                Some(timing) => timing.place(ideal, cycle, number),
            };
            number += 1;
            let to = (placed - half_dead).clamp(at, TAU);
            self.push(topology, to - at);
            at = to;
            dead_until = if half_dead > 0.0 {
                placed + half_dead
            } else {
                at
            };
            if high {
                opening += TAU;
            } else {
                closing += TAU;
            }
            high = !high;
        }
    }
}

/// A normal number for each index, whatever order they are asked in: two rounds of a counter-based generator
/// (G. L. Steele, D. Lea, C. H. Flood, "Fast splittable pseudorandom number generators", OOPSLA 2014) and the
/// transform of G. E. P. Box, M. E. Muller, Ann. Math. Statist. 29 (1958).
fn normal(seed: u64, index: u64) -> f64 {
    let mix = |mut x: u64| {
        x = (x ^ (x >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        x = (x ^ (x >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        x ^ (x >> 31)
    };
    let key = mix(seed.wrapping_add(0x9e37_79b9_7f4a_7c15));
    let uniform = |at: u64| {
        let bits = mix(key ^ mix(at.wrapping_mul(0x9e37_79b9_7f4a_7c15)));
        ((bits >> 11) as f64 + 0.5) / (1u64 << 53) as f64
    };
    (-2.0 * uniform(2 * index).ln()).sqrt() * (TAU * uniform(2 * index + 1)).cos()
}

#[cfg(test)]
mod tests {
    use super::*;

    const CLOSED: usize = 1;

    const SINGLE: Switches = Switches {
        high: CLOSED,
        low: OPEN,
        dead_rad: 0.0,
    };

    fn planned(pulse: &Pulse, timing: Option<&Timing>) -> Vec<Interval> {
        let mut intervals = Intervals::default();
        intervals.plan(pulse, &SINGLE, timing, 3).unwrap();
        intervals.as_slice().to_vec()
    }

    const HALF: Drive = Drive {
        closing_rad: -TAU / 4.0,
        width_rad: TAU / 2.0,
    };

    #[test]
    fn a_centred_pulse_is_closed_open_closed() {
        let all = planned(&Pulse::phased(&HALF, 0.0, 0.0), None);
        let expected = [(CLOSED, TAU / 4.0), (OPEN, TAU / 2.0), (CLOSED, TAU / 4.0)];
        assert_eq!(all.len(), 3);
        for (interval, (topology, length)) in all.iter().zip(expected) {
            assert_eq!(interval.topology, topology);
            assert!((interval.length_rad - length).abs() < 1e-15);
        }
    }

    #[test]
    fn edges_fall_where_the_moving_phase_meets_the_carrier() {
        // Phase 0.4 + 0.6 x/2pi: closing where x + phase = 3/4 turn, opening where it is 1/4 turn.
        let all = planned(&Pulse::phased(&HALF, 0.4, 0.6), None);
        let pace = 1.0 + 0.6 / TAU;
        let opening = (TAU / 4.0 - 0.4) / pace;
        let closing = (0.75 * TAU - 0.4) / pace;
        assert!((all[0].length_rad - opening).abs() < 1e-14);
        assert!((all[1].length_rad - (closing - opening)).abs() < 1e-14);
        let total: f64 = all.iter().map(|interval| interval.length_rad).sum();
        assert!((total - TAU).abs() < 1e-14);
    }

    #[test]
    fn a_width_that_moves_moves_both_edges() {
        // Width from a half to a quarter, centred: opening where x = (pi - (pi/2) x/2pi) / 2.
        let quarter = Drive {
            closing_rad: -TAU / 8.0,
            width_rad: TAU / 4.0,
        };
        let all = planned(&Pulse::between(&HALF, &quarter, 0.0, 0.0), None);
        assert!((all[0].length_rad - (TAU / 4.0) / (1.0 + 0.125)).abs() < 1e-14);
        // Closing where x = 2pi - (pi - (pi/2) x/2pi) / 2.
        let closing = 0.75 * TAU / (1.0 - 0.125);
        assert!((all[0].length_rad + all[1].length_rad - closing).abs() < 1e-14);
    }

    #[test]
    fn grid_and_jitter_move_edges_and_keep_the_period() {
        let timing = Timing {
            grid_rad: TAU / 50.0,
            ..Timing::default()
        };
        let all = planned(&Pulse::phased(&HALF, 0.123, 0.0), Some(&timing));
        for interval in &all {
            let steps = interval.length_rad / timing.grid_rad;
            assert!((steps - steps.round()).abs() < 1e-9);
        }
        let jitter = Timing {
            jitter_rad: 0.01,
            seed: 5,
            ..Timing::default()
        };
        let (mut square, count) = (0.0, 20_000u64);
        let mut intervals = Intervals::default();
        for cycle in 0..count {
            intervals
                .plan(
                    &Pulse::phased(&HALF, 0.0, 0.0),
                    &SINGLE,
                    Some(&jitter),
                    cycle,
                )
                .unwrap();
            square += (intervals.as_slice()[0].length_rad - TAU / 4.0).powi(2);
        }
        // 20,000 numbers: half a percent of the RMS to one standard deviation.
        assert!(((square / count as f64).sqrt() / 0.01 - 1.0).abs() < 0.02);
    }

    /// The intervals of a pair are those of its orbit's schedule: dead time around both edges.
    #[test]
    fn dead_time_lies_around_each_edge() {
        let pair = Switches {
            high: 1,
            low: 2,
            dead_rad: 0.2,
        };
        // Phases that put an edge right before, at and right after the border of the cycle.
        for phase_rad in [0.0, TAU / 4.0 - 0.05, TAU / 4.0, TAU / 4.0 + 0.05, 2.0] {
            let mut intervals = Intervals::default();
            let pulse = Pulse::phased(&HALF, phase_rad, 0.0);
            intervals.plan(&pulse, &pair, None, 0).unwrap();
            let mut lengths = [0.0; 3];
            for interval in intervals.as_slice() {
                lengths[interval.topology] += interval.length_rad;
            }
            for (found, expected) in lengths.iter().zip([0.4, TAU / 2.0 - 0.2, TAU / 2.0 - 0.2]) {
                assert!((found - expected).abs() < 1e-12, "{phase_rad}: {lengths:?}");
            }
        }
    }

    #[test]
    fn edges_that_would_run_backwards_are_refused() {
        let mut intervals = Intervals::default();
        let fast = Pulse::phased(&HALF, 0.0, -6.2);
        assert!(matches!(
            intervals.plan(&fast, &SINGLE, None, 7),
            Err(ReplayError::EdgeTooFast { cycle: 7, .. })
        ));
        let nothing = Pulse::phased(&HALF, f64::NAN, 0.0);
        assert!(intervals.plan(&nothing, &SINGLE, None, 0).is_err());
    }
}
