//! The stage integrated exactly, carrier cycle by carrier cycle.
//!
//! Within a cycle the supply and the drive's edges are linear in time; edges fall where they are, on no grid
//! ([`edges`]). Between edges a linear stage is exact ([`modal`], [`nested`]); the envelope of a cycle is the exact
//! Fourier integral of the load voltage over the carrier's period, and energies are exact integrals ([`topology`],
//! [`forms`]).

mod choke;
mod edges;
mod error;
mod forms;
mod gate;
mod modal;
mod nested;
mod propagator;
mod segments;
mod topology;
mod walk;

use std::f64::consts::TAU;

use num_complex::Complex64;

use crate::orbit::{Drive, Network, Reduced};
use crate::stage::Feed;
use choke::Choke;
pub use edges::{Interval, Pulse, Timing};
use edges::{Intervals, Switches};
pub use error::ReplayError;
pub use gate::Gate;
pub use segments::{Segments, replay_all, replay_cut};
use walk::{Walk, Walker};

/// The most independent states a replayed stage may have.
pub const MAX_REPLAY_STATES: usize = 23;

/// The highest harmonic whose envelope can be asked for.
pub const MAX_HARMONICS: usize = 3;

/// Which energies are integrated beside the envelope.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Account {
    /// None.
    Envelope,
    /// What the supply gives.
    Supply,
    /// What reaches the load and what is lost as well.
    Losses,
}

/// How intervals are propagated.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Form {
    /// In modal form where that holds, else by nested tables.
    Fastest,
    /// By nested tables in any case: for checks of the one against the other.
    Nested,
}

/// What is wanted of a replay.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Setup {
    /// Energies.
    pub account: Account,
    /// Envelopes up to this harmonic, 1 to [`MAX_HARMONICS`].
    pub harmonics: usize,
    /// Form of the propagators.
    pub form: Form,
}

impl Setup {
    /// The carrier's envelope with `account`, in the fastest form.
    pub fn of(account: Account) -> Self {
        Self {
            account,
            harmonics: 1,
            form: Form::Fastest,
        }
    }
}

/// The controls over one carrier cycle.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Cycle {
    /// Supply at start and end, linear between, V.
    pub supply_v: [f64; 2],
    /// What the drive does.
    pub pulse: Pulse,
}

/// A change of the pulse within a carrier cycle.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Cut {
    /// Index of the cycle in its stretch.
    pub cycle: usize,
    /// From where on, rad from the cycle's start.
    pub from_rad: f64,
    /// What the drive does from there on, as if it had done so from the cycle's start.
    pub pulse: Pulse,
}

/// Energies of one carrier cycle, J. Those that were not asked for are zero.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Energies {
    /// From the supply.
    pub supply_j: f64,
    /// Into the load, at all frequencies.
    pub load_j: f64,
    /// Lost in the switch.
    pub switch_j: f64,
    /// Lost in the feed's resistance.
    pub feed_j: f64,
    /// Lost in the ladder.
    pub ladder_j: f64,
    /// Taken up by an ideal choke: from the supply, less its own loss and what it gave to the drain.
    pub choke_j: f64,
}

impl Energies {
    /// Everything lost.
    pub fn losses_j(&self) -> f64 {
        self.switch_j + self.feed_j + self.ladder_j
    }
}

/// What one carrier cycle gave.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct CycleOutput {
    /// `2/T` times the integral of load voltage times `exp(-j 2 pi f t)`, peak volts.
    pub output_v: Complex64,
    /// The same with the weight `t/T`, from 0 at the cycle's start to 1 at its end.
    pub weighted_v: Complex64,
    /// `output_v` at the second and third harmonic; zero where not asked for.
    pub harmonics_v: [Complex64; MAX_HARMONICS - 1],
    /// Its energies.
    pub energies: Energies,
}

impl CycleOutput {
    /// The envelope at the border from `self` to `next`: the mean over both cycles under a triangle, `1 - |t|/T`. What
    /// moving harmonics leave in it falls with the square of the movement in a cycle, in [`CycleOutput::output_v`]
    /// in proportion.
    pub fn border_v(&self, next: &Self) -> Complex64 {
        self.weighted_v + next.output_v - next.weighted_v
    }
}

/// A linear stage that is replayed.
#[derive(Debug)]
pub struct Replay {
    walk: Box<dyn Walk>,
    choke: Option<(Choke, f64)>,
    timing: Option<Timing>,
    switches: Switches,
    account: Account,
    intervals: Intervals,
    pieces: Vec<Interval>,
    cycles: u64,
    /// From normalised energy to J.
    joule: f64,
}

impl Clone for Replay {
    fn clone(&self) -> Self {
        Self {
            walk: self.walk.clone_box(),
            choke: self.choke.clone(),
            intervals: self.intervals.clone(),
            pieces: Vec::new(),
            ..*self
        }
    }
}

impl Replay {
    /// `network` at rest. `drive` is the one that is used most: the current of an ideal choke is exact there.
    ///
    /// # Errors
    /// [`ReplayError`] where the stage is not linear or has no orbit.
    pub fn new(network: &Network, drive: &Drive, setup: Setup) -> Result<Self, ReplayError> {
        let stage = network.stage();
        let equations = network.linear_equations()?.ok_or(ReplayError::Curved)?;
        let choke = match stage.feed {
            Feed::Choke { ohm } => Some((Choke::new(network, drive)?, ohm / stage.load.ohm)),
            Feed::Inductor { .. } | Feed::Direct => None,
        };
        let equations: Vec<Reduced> = equations
            .positions
            .into_iter()
            .map(|(_, reduced)| reduced)
            .collect();
        if equations.iter().any(|one| one.b.ncols() != 1) {
            return Err(ReplayError::Inputs);
        }
        let states = equations.iter().map(|one| one.a.nrows()).max().unwrap_or(0);
        let build = |walk: Box<dyn Walk>| Self {
            walk,
            choke: choke.clone(),
            timing: None,
            switches: Switches::of(stage),
            account: setup.account,
            intervals: Intervals::default(),
            pieces: Vec::new(),
            cycles: 0,
            joule: 1.0 / (stage.load.ohm * TAU * stage.frequency_hz),
        };
        macro_rules! smallest {
            ($($size:literal)*) => {
                $(if states + 2 <= $size {
                    let walker = Walker::<$size>::new(&equations, &setup, choke.is_some())?;
                    return Ok(build(Box::new(walker)));
                })*
            };
        }
        smallest!(4 6 8 10 12 16 26);
        Err(ReplayError::TooLarge {
            given: states,
            allowed: MAX_REPLAY_STATES,
        })
    }

    /// The same with edges that fall as `timing` says.
    #[must_use]
    pub fn with_timing(mut self, timing: Timing) -> Self {
        self.timing = Some(timing);
        self
    }

    /// Puts the stage to rest: no energy stored.
    pub fn rest(&mut self) {
        self.walk.rest();
    }

    /// Puts the stage on its orbit at what `cycle` starts with, held.
    ///
    /// # Errors
    /// [`ReplayError`] where there is none.
    pub fn settle(&mut self, cycle: &Cycle) -> Result<(), ReplayError> {
        let pulse = match cycle.pulse {
            Pulse::Off => Pulse::Off,
            Pulse::Edges {
                closing_rad: [closing, _],
                opening_rad: [opening, _],
            } => Pulse::Edges {
                closing_rad: [closing; 2],
                opening_rad: [opening; 2],
            },
        };
        let held = Cycle {
            supply_v: [cycle.supply_v[0]; 2],
            pulse,
        };
        self.intervals
            .plan(&pulse, &self.switches, None, self.cycles)?;
        let [input, _] = self.input(&held)?;
        self.walk.settle(input, self.intervals.as_slice())
    }

    /// One carrier cycle onwards.
    ///
    /// # Errors
    /// Controls that are not finite, edges that run too fast, or an ideal choke with the switch off.
    #[inline]
    pub fn cycle(&mut self, cycle: &Cycle) -> Result<CycleOutput, ReplayError> {
        self.intervals.plan(
            &cycle.pulse,
            &self.switches,
            self.timing.as_ref(),
            self.cycles,
        )?;
        let input = self.input(cycle)?;
        Ok(self.walk(cycle.supply_v, input))
    }

    /// One carrier cycle through `intervals`, in any order of topologies: for gates that cut pulses, and for edges
    /// from elsewhere. Stages with an ideal choke have no such cycles, as their current depends on the width.
    ///
    /// # Errors
    /// Intervals that do not fill the cycle; an ideal choke.
    pub fn cycle_of(
        &mut self,
        supply_v: [f64; 2],
        intervals: &[Interval],
    ) -> Result<CycleOutput, ReplayError> {
        let cycle = self.cycles;
        let total_rad: f64 = intervals.iter().map(|interval| interval.length_rad).sum();
        let count = self.walk.topologies();
        let sound = |one: &Interval| one.length_rad >= 0.0 && one.topology < count;
        if !(intervals.iter().all(sound) && (total_rad - TAU).abs() < 1e-9) {
            return Err(ReplayError::Intervals {
                cycle,
                total_rad,
                last: count.saturating_sub(1),
            });
        }
        if self.choke.is_some() {
            return Err(ReplayError::ChokeIntoOpen { cycle });
        }
        if !supply_v.iter().all(|volt| volt.is_finite()) {
            return Err(ReplayError::NotFinite { cycle });
        }
        let walked = self.walk.advance(supply_v, intervals);
        self.cycles += 1;
        Ok(self.output(&walked, supply_v, supply_v))
    }

    /// One carrier cycle whose pulse is cut by a gate: all switches are open outside `on`, rad from the cycle's start
    /// (see [`Gate`]).
    ///
    /// # Errors
    /// As [`Replay::cycle`] and [`Replay::cycle_of`].
    pub fn cycle_gated(
        &mut self,
        cycle: &Cycle,
        on: &[[f64; 2]],
    ) -> Result<CycleOutput, ReplayError> {
        self.intervals.plan(
            &cycle.pulse,
            &self.switches,
            self.timing.as_ref(),
            self.cycles,
        )?;
        let mut intervals = std::mem::take(&mut self.pieces);
        gate::gated(self.intervals.as_slice(), on, &mut intervals);
        let output = self.cycle_of(cycle.supply_v, &intervals);
        self.pieces = intervals;
        output
    }

    /// One carrier cycle whose pulse changes at once at each of `cuts`, in their order: the switches stand where the
    /// pulse of the time has them.
    ///
    /// # Errors
    /// As [`Replay::cycle`] and [`Replay::cycle_of`].
    pub fn cycle_cut(&mut self, cycle: &Cycle, cuts: &[Cut]) -> Result<CycleOutput, ReplayError> {
        if cuts.is_empty() {
            return self.cycle(cycle);
        }
        let mut pieces = std::mem::take(&mut self.pieces);
        pieces.clear();
        let mut from = 0.0;
        let mut pulse = &cycle.pulse;
        for end in 0..=cuts.len() {
            let next = cuts.get(end);
            let to = next.map_or(TAU, |cut| cut.from_rad.clamp(from, TAU).max(from));
            if to > from {
                self.intervals
                    .plan(pulse, &self.switches, self.timing.as_ref(), self.cycles)?;
                gate::cut(self.intervals.as_slice(), [from, to], &mut pieces);
                from = to;
            }
            if let Some(cut) = next {
                pulse = &cut.pulse;
            }
        }
        let output = self.cycle_of(cycle.supply_v, &pieces);
        self.pieces = pieces;
        output
    }

    /// One carrier cycle of a list of edges: the pulse is high in `high`, rad from the cycle's start (see [`Gate`]).
    /// Dead time of a pair is not added: the list has what it has.
    ///
    /// # Errors
    /// As [`Replay::cycle_of`].
    pub fn cycle_pulsed(
        &mut self,
        supply_v: [f64; 2],
        high: &[[f64; 2]],
    ) -> Result<CycleOutput, ReplayError> {
        let mut intervals = std::mem::take(&mut self.pieces);
        gate::pulsed(&self.switches, high, &mut intervals);
        let output = self.cycle_of(supply_v, &intervals);
        self.pieces = intervals;
        output
    }

    /// The network's input at both ends of a cycle: the supply, or an ideal choke's current.
    #[inline]
    fn input(&self, cycle: &Cycle) -> Result<[f64; 2], ReplayError> {
        if !(cycle.supply_v[0].is_finite() && cycle.supply_v[1].is_finite()) {
            return Err(ReplayError::NotFinite { cycle: self.cycles });
        }
        let Some((choke, _)) = &self.choke else {
            return Ok(cycle.supply_v);
        };
        match &cycle.pulse {
            Pulse::Off => Err(ReplayError::ChokeIntoOpen { cycle: self.cycles }),
            Pulse::Edges {
                closing_rad,
                opening_rad,
            } => Ok([0, 1]
                .map(|at| cycle.supply_v[at] * choke.share(opening_rad[at] - closing_rad[at]))),
        }
    }

    #[inline]
    fn walk(&mut self, supply_v: [f64; 2], input: [f64; 2]) -> CycleOutput {
        let walked = self.walk.advance(input, self.intervals.as_slice());
        self.cycles += 1;
        self.output(&walked, supply_v, input)
    }

    #[inline]
    fn output(&self, walked: &walk::Walked, supply_v: [f64; 2], input: [f64; 2]) -> CycleOutput {
        let [output_v, second, third] = walked.outputs;
        let mut output = CycleOutput {
            output_v,
            weighted_v: walked.tilt,
            harmonics_v: [second, third],
            energies: Energies::default(),
        };
        if self.account == Account::Envelope {
            return output;
        }
        let [load, switch, feed, ladder, drain] = walked.powers.map(|power| power * self.joule);
        output.energies = Energies {
            supply_j: walked.supply * self.joule,
            load_j: load,
            switch_j: switch,
            feed_j: feed,
            ladder_j: ladder,
            choke_j: 0.0,
        };
        if let Some((_, ohm)) = &self.choke {
            // Products of two straight lines over the cycle.
            let product = |a: [f64; 2], b: [f64; 2]| {
                TAU * self.joule * (2.0 * (a[0] * b[0] + a[1] * b[1]) + a[0] * b[1] + a[1] * b[0])
                    / 6.0
            };
            let energies = &mut output.energies;
            energies.supply_j = product(supply_v, input);
            energies.feed_j = ohm * product(input, input);
            if self.account == Account::Losses {
                energies.choke_j = energies.supply_j - energies.feed_j - drain;
            }
        }
        output
    }

    /// Cycles after which a deviation from the orbit of `cycle` has fallen by the factor `part`.
    ///
    /// # Errors
    /// [`ReplayError`] where it never does.
    pub fn memory_cycles(&mut self, cycle: &Cycle, part: f64) -> Result<u64, ReplayError> {
        self.intervals
            .plan(&cycle.pulse, &self.switches, None, self.cycles)?;
        let map = self.walk.period_map(self.intervals.as_slice());
        let radius = map
            .complex_eigenvalues()
            .iter()
            .map(|value| value.norm())
            .fold(1e-12, f64::max);
        if radius >= 1.0 - 1e-12 {
            return Err(ReplayError::NeverSettles);
        }
        // Deviations may grow before they decay: the map's powers are held against the part itself.
        let mut power = map.clone();
        let mut cycles = 1u64;
        while power.norm() > part && cycles < 1 << 40 {
            power = &power * &power;
            cycles *= 2;
        }
        Ok(cycles)
    }

    /// Energy stored now, J.
    pub fn stored_j(&self) -> f64 {
        self.walk.stored() * self.joule
    }

    /// Independent states of the stage.
    pub fn states(&self) -> usize {
        self.walk.states()
    }

    /// For each topology the condition number of its eigenvectors; `None` where the modal form does not hold and
    /// nested tables are used.
    pub fn conditions(&self) -> Vec<Option<f64>> {
        self.walk.conditions()
    }

    /// Number of the next cycle.
    pub fn cycles(&self) -> u64 {
        self.cycles
    }
}
