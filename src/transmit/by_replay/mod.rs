//! A track through the replayed stage: controls to cycles, cycles through the stage, their envelope back to the track's
//! instants.

mod controls;
mod envelope;
mod filter;
mod gates;
mod rails;

use std::collections::VecDeque;
use std::f64::consts::TAU;
use std::ops::Range;

use num_complex::Complex64;

use super::by_map::Energy;
use super::replay::{
    Account, Cut, Cycle, CycleOutput, Pulse, Replay, ReplayError, Segments, Setup, Timing,
    replay_cut,
};
use crate::drive::{Combining, Drawn, DrawnPower, FILTER_LAG, Scheme, Track, TrackPart};
use crate::map::Map;
use crate::orbit::{Drive, Network};
use controls::{Border, Controls};
use envelope::Envelope;
use filter::Behind;
use gates::Gates;
use rails::Rails;

/// Cycles that are replayed at a time: some MB.
const STRETCH: usize = 1 << 16;

/// What is left of a wrong start where a segment begins to count.
const FORGOTTEN: f64 = 1e-12;

/// What a replay needs besides the track.
#[derive(Debug, Clone, Copy)]
pub struct ReplayRequest<'a> {
    /// The stage.
    pub network: &'a Network,
    /// The scheme whose track it is.
    pub scheme: &'a Scheme,
    /// The map of the scheme, for what a replay does not tell: the driver's power.
    pub map: &'a Map,
    /// Rate of the track, Hz.
    pub rate_hz: f64,
    /// Instants whose energies count.
    pub counted: (u64, u64),
    /// Segments at a time.
    pub workers: usize,
}

/// What moves the stage along the track.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Moves {
    /// The control is the supply; the width is full.
    Supply,
    /// The control is the width; the supply is full, or in the track.
    Width,
    /// Two branches of full supply and width.
    Branches,
    /// The gate: on and off, at the widths of its levels.
    Gate,
}

/// How controls are read between the instants of the track.
#[derive(Debug, Clone)]
enum Reader {
    BandLimited(Controls),
    Rails(Rails),
}

/// One stage with its controls and what it gave.
#[derive(Debug, Clone)]
struct Branch {
    controls: Reader,
    replay: Replay,
    cycles: Vec<Cycle>,
    cuts: Vec<Cut>,
    outputs: Vec<CycleOutput>,
    /// Factor of its output in the sum.
    weight: f64,
}

/// A replayed stage at work on a track.
#[derive(Debug, Clone)]
pub struct ReplayTransmitter<'a> {
    request: ReplayRequest<'a>,
    moves: Moves,
    full: Drive,
    branches: Vec<Branch>,
    envelope: Envelope,
    gates: Option<Gates>,
    /// A filter behind the stage, and the sum of counted powers that pass it, its loss aside, W.
    behind: Option<Behind>,
    through_w: f64,
    /// The last cycle of each branch.
    last: [CycleOutput; 2],
    overlap: u64,
    started: bool,
    /// Instants that wait for their output.
    waiting: VecDeque<Row>,
    parts: VecDeque<TrackPart>,
    taken: u64,
    given: u64,
    energy: Energy,
    /// Sums of supply and output powers over counted cycles, and how many those are.
    supply_w: f64,
    generated_w: f64,
    counted_cycles: u64,
    /// What the modulator draws: its model, the instant that is being summed up, the means of the one before.
    drawn: DrawnPower,
    drawn_at: u64,
    instant: Instant,
    working: (f64, f64),
    modulator_w: f64,
    drawn_instants: u64,
    highest_control: f64,
    scratch: [Vec<Complex64>; 3],
    values: Vec<Complex64>,
}

/// Sums over the cycles of one instant.
#[derive(Debug, Clone, Copy, Default)]
struct Instant {
    cycles: f64,
    supply_v: f64,
    supply_w: f64,
}

/// An instant of the track that waits for its output.
#[derive(Debug, Clone, Copy)]
struct Row {
    wanted: Complex64,
    asked: f64,
    control: f64,
    phase: Complex64,
    supply_v: Option<f64>,
    /// Output and powers by map, of a scheme that has them in its track.
    by_map: Option<(Complex64, Drawn)>,
    /// How many parts it has, which wait in a row of their own.
    parts: usize,
}

impl<'a> ReplayTransmitter<'a> {
    /// The stage of `request` before the track's first instant.
    ///
    /// # Errors
    /// [`ReplayError`].
    pub fn new(request: ReplayRequest<'a>) -> Result<Self, ReplayError> {
        let stage = request.network.stage();
        let carrier_hz = stage.frequency_hz;
        let full = Drive::new(&stage.driver, stage.driver.duty);
        let mut replay = Replay::new(request.network, &full, Setup::of(Account::Supply))?;
        let moves = match request.scheme {
            Scheme::Supply(_) => Moves::Supply,
            Scheme::Width(_) | Scheme::Levels(_) => Moves::Width,
            // Each branch is replayed by itself, which joined ones are not.
            Scheme::Outphase(scheme) if matches!(scheme.combining, Combining::Joined(_)) => {
                return Err(ReplayError::Scheme {
                    scheme: "outphase, joined,",
                });
            }
            Scheme::Outphase(_) => Moves::Branches,
            Scheme::Burst(_) => Moves::Gate,
            other => {
                return Err(ReplayError::Scheme {
                    scheme: other.name(),
                });
            }
        };
        if let Scheme::Width(scheme) = request.scheme {
            replay = replay.with_timing(Timing {
                grid_rad: scheme.grid_s.unwrap_or(0.0) * carrier_hz * TAU,
                jitter_rad: scheme.jitter_s * carrier_hz * TAU,
                seed: scheme.seed,
            });
        }
        let held = Cycle {
            supply_v: [stage.supply_v; 2],
            pulse: Pulse::phased(&full, 0.0, 0.0),
        };
        // A narrow pulse lets a stage ring longer.
        let narrow = Drive::new(&stage.driver, 0.05 * stage.driver.duty);
        let rarely = Cycle {
            pulse: Pulse::phased(&narrow, 0.0, 0.0),
            ..held
        };
        let mut overlap = replay.memory_cycles(&held, FORGOTTEN)?;
        if matches!(moves, Moves::Width | Moves::Gate) {
            overlap = overlap.max(replay.memory_cycles(&rarely, FORGOTTEN)?);
        }
        let (mut gates, mut behind) = (None, None);
        if let Scheme::Burst(scheme) = request.scheme {
            // What rings without end while all switches are open is replayed in one.
            let open = Cycle {
                pulse: Pulse::Off,
                ..held
            };
            let open = replay.memory_cycles(&open, FORGOTTEN);
            overlap = overlap.max(open.unwrap_or(u64::MAX));
            gates = Some(Gates::new(stage, request.map, request.rate_hz));
            let filter = scheme.filter.as_ref();
            behind = filter.map(|filter| Behind::new(filter, request.map, request.rate_hz));
        }
        let branch = Branch {
            controls: match request.scheme {
                Scheme::Levels(_) => Reader::Rails(Rails::new(carrier_hz, request.rate_hz)),
                _ => Reader::BandLimited(Controls::new(carrier_hz, request.rate_hz)),
            },
            replay,
            cycles: Vec::new(),
            cuts: Vec::new(),
            outputs: Vec::new(),
            weight: 1.0,
        };
        let branches = match request.scheme {
            Scheme::Outphase(scheme) => {
                // sqrt(2) V (b1 + g b2) / 2, see the scheme.
                let gains = [1.0, 10f64.powf(-scheme.gain_mismatch_db / 20.0)];
                gains
                    .iter()
                    .map(|gain| {
                        let mut one = branch.clone();
                        one.weight = gain / std::f64::consts::SQRT_2;
                        one
                    })
                    .collect()
            }
            _ => vec![branch],
        };
        Ok(Self {
            request,
            moves,
            full,
            branches,
            envelope: Envelope::new(carrier_hz, request.rate_hz),
            gates,
            behind,
            through_w: 0.0,
            last: [CycleOutput::default(); 2],
            overlap,
            started: false,
            waiting: VecDeque::new(),
            parts: VecDeque::new(),
            taken: 0,
            given: 0,
            energy: Energy::default(),
            supply_w: 0.0,
            generated_w: 0.0,
            counted_cycles: 0,
            drawn: DrawnPower::new(&request.scheme.modulator(), request.rate_hz),
            drawn_at: 0,
            instant: Instant::default(),
            working: (0.0, 0.0),
            modulator_w: 0.0,
            drawn_instants: 0,
            highest_control: 0.0,
            scratch: Default::default(),
            values: Vec::new(),
        })
    }

    /// Takes the instants of `track`. Appends to `ready` and `output_v` the instants whose output is complete, in
    /// order: both lag behind what was taken.
    ///
    /// # Errors
    /// [`ReplayError`] of a cycle.
    pub fn push(
        &mut self,
        track: &Track,
        ready: &mut Track,
        output_v: &mut Vec<Complex64>,
    ) -> Result<(), ReplayError> {
        let mut parts = &track.parts[..];
        for at in 0..track.len() {
            let count = parts.iter().take_while(|part| part.at == at).count();
            let (own, later) = parts.split_at(count);
            parts = later;
            self.parts.extend(own);
            self.waiting.push_back(Row {
                parts: count,
                wanted: track.wanted[at],
                asked: track.asked[at],
                control: track.control[at],
                phase: track.phase[at],
                supply_v: track.supply_v.get(at).copied(),
                by_map: track
                    .output_v
                    .get(at)
                    .copied()
                    .zip(track.drawn.get(at).copied()),
            });
        }
        self.taken += track.len() as u64;
        if let Some(gates) = &mut self.gates {
            gates.push(&track.gate);
        }
        // In pieces, so that the cycles of a piece are a stretch or few.
        let carrier_hz = self.request.network.stage().frequency_hz;
        let piece = (STRETCH as f64 * self.request.rate_hz / carrier_hz).ceil() as usize;
        let mut from = 0;
        while from < track.len() {
            let to = (from + piece.max(1)).min(track.len());
            self.piece(track, from..to)?;
            from = to;
        }
        self.give(ready, output_v);
        Ok(())
    }

    /// Holds the last instant until the output of every instant that was taken is complete.
    ///
    /// # Errors
    /// [`ReplayError`] of a cycle.
    pub fn finish(
        &mut self,
        ready: &mut Track,
        output_v: &mut Vec<Complex64>,
    ) -> Result<(), ReplayError> {
        let Some(last) = self.waiting.back().copied() else {
            return Ok(());
        };
        let reader = match &self.branches[0].controls {
            Reader::BandLimited(controls) => controls.latency(),
            Reader::Rails(_) => 1,
        };
        let latency = reader + self.envelope.latency();
        let mut held = Track::default();
        let branch = [last.phase; 2];
        for _ in 0..latency {
            held.wanted.push(last.wanted);
            held.asked.push(last.asked);
            held.control.push(last.control);
            held.phase.push(last.phase);
            held.supply_v.extend(last.supply_v);
            held.branches.push(branch);
        }
        let mut rounds = 0;
        while !self.waiting.is_empty() && rounds < 64 {
            self.piece(&held, 0..latency)?;
            self.give(ready, output_v);
            rounds += 1;
        }
        Ok(())
    }

    fn piece(&mut self, track: &Track, range: Range<usize>) -> Result<(), ReplayError> {
        let full_v = self.request.network.stage().supply_v;
        let driver = &self.request.network.stage().driver;
        let (full, moves) = (self.full, self.moves);
        let limit = self.request.map.domain();
        let [controls, first, second] = &mut self.scratch;
        controls.clear();
        first.clear();
        second.clear();
        for at in range.clone() {
            let supply_v = track.supply_v.get(at).copied().unwrap_or(full_v);
            controls.push(Complex64::new(track.control[at], supply_v));
        }
        match moves {
            Moves::Branches => {
                for pair in track.branches.get(range.clone()).unwrap_or(&[]) {
                    first.push(pair[0]);
                    second.push(pair[1]);
                }
            }
            _ => first.extend_from_slice(&track.phase[range.clone()]),
        }
        // The controls between instants may pass what is there at them.
        let cycle_of = |start: Border, end: Border| {
            let ends = [start, end];
            let turn = end.phase_rad - start.phase_rad;
            match moves {
                Moves::Supply => Cycle {
                    supply_v: ends.map(|border| border.control[0].clamp(0.0, full_v)),
                    pulse: Pulse::phased(&full, start.phase_rad, turn),
                },
                Moves::Branches | Moves::Gate => Cycle {
                    supply_v: [full_v; 2],
                    pulse: Pulse::phased(&full, start.phase_rad, turn),
                },
                Moves::Width => {
                    let [from, to] = ends
                        .map(|border| Drive::new(driver, border.control[0].clamp(1e-4, limit.1)));
                    Cycle {
                        supply_v: ends.map(|border| border.control[1].clamp(0.0, full_v)),
                        pulse: Pulse::between(&from, &to, start.phase_rad, turn),
                    }
                }
            }
        };
        let segments = Segments {
            workers: self.request.workers,
            overlap: self.overlap,
        };
        for (index, branch) in self.branches.iter_mut().enumerate() {
            let phasors = if index == 0 { &*first } else { &*second };
            branch.cycles.clear();
            branch.cuts.clear();
            let (cycles, cuts) = (&mut branch.cycles, &mut branch.cuts);
            let gates = &mut self.gates;
            let mut each = |start, end| {
                let cycle = match gates {
                    Some(gates) => gates.cycle(cycles.len(), [start, end], cuts),
                    None => cycle_of(start, end),
                };
                cycles.push(cycle);
            };
            match &mut branch.controls {
                Reader::BandLimited(reader) => reader.push(controls, phasors, each),
                Reader::Rails(rails) => rails.push(track, range.clone(), full_v, &mut each),
            }
            if let (false, Some(cycle)) = (self.started, branch.cycles.first()) {
                match branch.replay.settle(cycle) {
                    // With all switches open something may ring without end: it begins without any energy.
                    Err(ReplayError::NeverSettles) if moves == Moves::Gate => branch.replay.rest(),
                    settled => settled?,
                }
            }
            replay_cut(
                &mut branch.replay,
                &branch.cycles,
                &branch.cuts,
                segments,
                &mut branch.outputs,
            )?;
        }
        self.started |= !self.branches[0].cycles.is_empty();
        self.account();
        let branches = &self.branches;
        let count = branches
            .iter()
            .map(|one| one.outputs.len())
            .min()
            .unwrap_or(0);
        let last = &self.last;
        let sums = (0..count).map(|at| {
            let all = branches.iter().zip(last);
            all.map(|(one, last)| {
                let before = match at.checked_sub(1) {
                    Some(before) => &one.outputs[before],
                    None => last,
                };
                one.weight * before.border_v(&one.outputs[at])
            })
            .sum()
        });
        self.envelope.push(sums, &mut self.values);
        for (last, branch) in self.last.iter_mut().zip(&self.branches) {
            if let Some(output) = branch.outputs.last() {
                *last = *output;
            }
        }
        Ok(())
    }

    /// Adds the energies of the cycles that were just replayed. A cycle belongs to the instant within which its middle
    /// lies; the modulator sees the means over instants.
    fn account(&mut self) {
        let Some(first) = self.branches.first() else {
            return;
        };
        let load_ohm = self.request.map.load_ohm();
        let carrier_hz = self.request.network.stage().frequency_hz;
        let instants = self.request.rate_hz / carrier_hz;
        let count = first.outputs.len();
        // What passes a filter leaves it later.
        let late = if self.behind.is_some() { FILTER_LAG } else { 0 };
        let begin = first.replay.cycles() - count as u64;
        for at in 0..count {
            let instant = ((begin + at as u64) as f64 + 0.5) * instants;
            let instant = instant as u64;
            while self.drawn_at < instant {
                self.draw();
            }
            let cycles = self.branches.first().and_then(|one| one.cycles.get(at));
            let [start_v, end_v] = cycles.map_or([0.0; 2], |cycle| cycle.supply_v);
            let outputs = self.branches.iter().filter_map(|one| one.outputs.get(at));
            let (mut supply_j, mut square) = (0.0, 0.0);
            for output in outputs {
                supply_j += output.energies.supply_j;
                square += output.output_v.norm_sqr();
            }
            self.instant.cycles += 1.0;
            self.instant.supply_v += 0.5 * (start_v + end_v);
            self.instant.supply_w += supply_j * carrier_hz;
            let (from, to) = self.request.counted;
            if (from..to).contains(&(instant + late as u64)) {
                self.counted_cycles += 1;
                self.supply_w += supply_j * carrier_hz;
                self.generated_w += square / (2.0 * load_ohm);
            }
        }
    }

    /// Hands the means over an instant to the modulator; an instant without a cycle is as the one before.
    fn draw(&mut self) {
        let instant = self.instant;
        if instant.cycles > 0.0 {
            let supply_v = instant.supply_v / instant.cycles;
            let supply_w = instant.supply_w / instant.cycles;
            let supply_a = if supply_v > 0.0 {
                supply_w / supply_v
            } else {
                0.0
            };
            self.working = (supply_v, supply_a);
        }
        self.instant = Instant::default();
        let modulator_w = self.drawn.push(self.working.0, self.working.1);
        let (from, to) = self.request.counted;
        if (from..to).contains(&self.drawn_at) {
            self.drawn_instants += 1;
            self.modulator_w += modulator_w;
        }
        self.drawn_at += 1;
    }

    /// Hands out the instants whose output is complete.
    fn give(&mut self, ready: &mut Track, output_v: &mut Vec<Complex64>) {
        let load_ohm = self.request.map.load_ohm();
        let count = self.values.len().min(self.waiting.len());
        let (from, to) = self.request.counted;
        for (value, row) in self.values.drain(..).zip(self.waiting.drain(..count)) {
            ready.wanted.push(row.wanted);
            ready.asked.push(row.asked);
            ready.control.push(row.control);
            ready.phase.push(row.phase);
            ready.supply_v.extend(row.supply_v);
            if let Some((seen_v, drawn)) = row.by_map {
                ready.output_v.push(seen_v);
                ready.drawn.push(drawn);
            }
            let at = ready.control.len() - 1;
            let parts = self.parts.drain(..row.parts.min(self.parts.len()));
            ready
                .parts
                .extend(parts.map(|part| TrackPart { at, ..part }));
            let (value, through_w) = match &mut self.behind {
                Some(behind) => behind.push(value),
                None => (value, value.norm_sqr() / (2.0 * load_ohm)),
            };
            output_v.push(value);
            if (from..to).contains(&self.given) {
                self.through_w += through_w;
                self.energy.samples += 1;
                self.energy.output_w += value.norm_sqr() / (2.0 * load_ohm);
                self.energy.driver_w += match row.by_map {
                    Some((_, drawn)) => drawn.driver_w,
                    None => self.request.map.driver_held_w(row.control).unwrap_or(0.0),
                };
                self.highest_control = self.highest_control.max(row.control);
            }
            self.given += 1;
        }
    }

    /// The sums so far: the supply's from integrated energy, the modulator's by its model from the mean voltage and
    /// current of each instant, the driver's by the map. What a filter turns away is not drawn, or burnt, as by map.
    pub fn energy(&self) -> Energy {
        let mut energy = self.energy;
        let samples = energy.samples as f64;
        let cycles = self.counted_cycles as f64;
        energy.stage_w = self.supply_w / cycles * samples;
        energy.modulator_w = self.modulator_w / self.drawn_instants as f64 * samples;
        energy.generated_w = match self.moves {
            Moves::Branches => self.generated_w / cycles * samples,
            _ => energy.output_w,
        };
        energy.filter_w = energy.output_w;
        if self.moves == Moves::Gate {
            if let Some(behind) = &self.behind {
                let delivered_w = self.generated_w / cycles * samples;
                energy.stage_w -= behind.not_drawn_w(delivered_w - self.through_w);
                energy.generated_w = if behind.reflects() {
                    self.through_w
                } else {
                    delivered_w
                };
                energy.filter_w = energy.generated_w;
            }
            energy.modulator_w = energy.stage_w;
        }
        energy
    }

    /// The highest control so far.
    pub fn highest_control(&self) -> f64 {
        self.highest_control
    }

    /// Carrier cycles so far, of all branches.
    pub fn cycles(&self) -> u64 {
        self.branches
            .iter()
            .map(|branch| branch.replay.cycles())
            .sum()
    }

    /// Cycles that a segment starts early.
    pub fn overlap_cycles(&self) -> u64 {
        self.overlap
    }
}
