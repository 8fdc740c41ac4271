//! The next table: the inverse of what the capture shows, damped.
//!
//! ```text
//! gain       g = |F(u_t)| / target(m_t)         the highest magnitude seen keeps its control
//! inverse    u(m) = |F|^-1(g target(m)),  p(m) = arg F(u_t) - arg F(u(m))
//! next       u' = u_old + d (u - u_old),  p' = p_old + d (p - p_old)        d: the damping
//! not seen   u' = u_old u'(m_e) / u_old(m_e),  p' = p_old + p'(m_e) - p_old(m_e)     m_e: nearest magnitude seen
//! ```

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::cloud::{InForce, StaticFit};
use crate::drive::{Lookup, LookupError, Shaping, Word};
use crate::map::Control;
use crate::math::monotone::Curve;
use crate::predistort::{BelowFloor, Entry, EntryState, Table, TableError, TableRequest};

/// Controls farther apart than this many times their usual distance are a gap.
const GAP: f64 = 4.0;

/// How the next table is made.
#[derive(Debug, Clone, PartialEq)]
pub struct NextRequest {
    /// Its sizes, spacing and rate.
    pub table: TableRequest,
    /// The scheme's floor and its shape.
    pub shaping: Shaping,
    /// How much of the way to the inverse is taken, above 0 up to 1.
    pub damping: f64,
    /// Full range of the control, in its own unit.
    pub full_control: f64,
    /// Which control.
    pub control: Control,
    /// What the table is called.
    pub title: String,
}

/// A table, and what it is made of.
#[derive(Debug, Clone)]
pub struct NextTable {
    /// The table.
    pub table: Table,
    /// What the stage does, as the capture shows it.
    pub stage: StageCurve,
    /// Mean square that rounding to the table's words adds to the output, over the output's, dB.
    pub rounding_db: f64,
}

/// The stage's output over the control's fraction: rising amplitude and phase.
#[derive(Debug, Clone)]
pub struct StageCurve {
    amplitude: Curve,
    phase: Curve,
    gaps: Vec<(f64, f64)>,
    /// Wanted magnitudes that were seen.
    pub seen: (f64, f64),
    /// Controls at both ends.
    pub control: (f64, f64),
    /// Cells that were joined because the amplitude fell or the control stood still.
    pub joined: usize,
}

impl StageCurve {
    fn of(fit: &StaticFit) -> Option<Self> {
        // (control, output, weight), neighbours joined until both controls and amplitudes rise.
        let mut points: Vec<(f64, Complex64, f64)> = fit
            .points
            .iter()
            .map(|point| (point.control, point.output, point.samples as f64))
            .collect();
        points.sort_by(|a, b| a.0.total_cmp(&b.0));
        let cells = points.len();
        let mut blocks: Vec<(f64, Complex64, f64)> = Vec::new();
        for point in points {
            blocks.push(point);
            while let [.., before, last] = blocks[..] {
                if before.0 < last.0 - 1e-12 && before.1.norm() < last.1.norm() {
                    break;
                }
                let weight = before.2 + last.2;
                let mean = |a: f64, b: f64| (a * before.2 + b * last.2) / weight;
                blocks.truncate(blocks.len() - 2);
                blocks.push((
                    mean(before.0, last.0),
                    (before.1 * before.2 + last.1 * last.2) / weight,
                    weight,
                ));
            }
        }
        let control: Vec<f64> = blocks.iter().map(|block| block.0).collect();
        let mut steps: Vec<f64> = control.windows(2).map(|pair| pair[1] - pair[0]).collect();
        steps.sort_by(f64::total_cmp);
        let usual = *steps.get(steps.len() / 2)?;
        // From the top, where the phase is surest, downwards without jumps.
        let mut phase = vec![0.0; blocks.len()];
        let mut last = blocks.last()?.1.arg();
        for (index, block) in blocks.iter().enumerate().rev() {
            let here = block.1.arg();
            last = here - TAU * ((here - last) / TAU).round();
            phase[index] = last;
        }
        let seen = (fit.points.first()?.magnitude, fit.points.last()?.magnitude);
        Some(Self {
            joined: cells - blocks.len(),
            gaps: control
                .windows(2)
                .filter(|pair| pair[1] - pair[0] > GAP * usual)
                .map(|pair| (pair[0], pair[1]))
                .collect(),
            control: (control[0], control[control.len() - 1]),
            seen,
            amplitude: Curve::new(
                control.clone(),
                blocks.iter().map(|block| block.1.norm()).collect(),
            )
            .ok()?,
            phase: Curve::new(control, phase).ok()?,
        })
    }

    /// Output at the control's fraction, held at the ends of what was seen.
    pub fn output(&self, control: f64) -> Complex64 {
        Complex64::from_polar(
            self.amplitude.at_held(control).0,
            self.phase.at_held(control).0,
        )
    }

    fn amplitude(&self, control: f64) -> f64 {
        self.amplitude.at_held(control).0
    }

    fn phase_rad(&self, control: f64) -> f64 {
        self.phase.at_held(control).0
    }

    fn inverse(&self, amplitude: f64) -> f64 {
        let (low, high) = self.control;
        if amplitude <= self.amplitude(low) {
            return low;
        }
        if amplitude >= self.amplitude(high) {
            return high;
        }
        self.amplitude.inverse(amplitude).unwrap_or(high)
    }
}

/// The next table after `in_force`.
///
/// # Errors
/// [`TableError`]; [`TableError::NothingSeen`] where the capture holds no rising amplitude.
pub fn next_table(
    fit: &StaticFit,
    in_force: InForce<'_>,
    request: &NextRequest,
) -> Result<NextTable, TableError> {
    let size = request.table.size;
    if !size.is_allowed() {
        return Err(LookupError::Size { given: size }.into());
    }
    let stage = StageCurve::of(fit).ok_or(TableError::NothingSeen)?;
    let maker = Maker::new(&stage, in_force, request);
    let steps = (size.depth - 1) as f64;
    let entries: Vec<Entry> = (0..size.depth)
        .map(|index| maker.entry(request.table.spacing.magnitude(index as f64 / steps)))
        .collect();
    let words = entries
        .iter()
        .map(|entry| Word {
            control: size.control_word(entry.control),
            phase: size.phase_word(entry.phase_rad),
        })
        .collect();
    let lookup = Lookup::new(
        size,
        request.table.spacing,
        request.table.between,
        request.table.rate,
        words,
    )?;
    let rounding_db = rounding_db(fit, &stage, &lookup);
    Ok(NextTable {
        table: Table {
            lookup,
            entries,
            full_control: request.full_control,
            full_output_v: None,
            control: request.control,
            passes: Vec::new(),
            title: request.title.clone(),
        },
        rounding_db,
        stage,
    })
}

struct Maker<'a> {
    stage: &'a StageCurve,
    in_force: InForce<'a>,
    request: &'a NextRequest,
    /// From the wanted magnitude to the wanted output, both parts of full range.
    target: Shaping,
    gain: f64,
    /// Phase of the highest magnitude seen: of the stage, and of the table in force.
    top_phases: (f64, f64),
}

impl<'a> Maker<'a> {
    fn new(stage: &'a StageCurve, in_force: InForce<'a>, request: &'a NextRequest) -> Self {
        let (floor, shape) = (request.shaping.floor, request.shaping.shape);
        let highest = stage.amplitude(stage.control.1);
        let follows = floor > 0.0 && request.table.below_floor == BelowFloor::Shaped;
        // Near the top the target of a floor is the magnitude itself but for its last digits.
        let floor_output = if follows {
            stage.amplitude(floor) / highest * stage.seen.1
        } else {
            0.0
        };
        let target = Shaping {
            shape,
            floor: floor_output,
        };
        Self {
            gain: highest / target.apply(stage.seen.1),
            top_phases: (
                stage.phase_rad(stage.control.1),
                in_force.at(stage.seen.1).1,
            ),
            stage,
            in_force,
            request,
            target,
        }
    }

    /// What is in force, its phase counted from that of the highest magnitude seen.
    fn old(&self, magnitude: f64) -> (f64, f64) {
        let (control, phase) = self.in_force.at(magnitude);
        (control, wrapped(phase - self.top_phases.1))
    }

    /// The damped inverse at a magnitude that was seen.
    fn damped(&self, magnitude: f64) -> (f64, f64) {
        let wanted = self.gain * self.target.apply(magnitude);
        let control = self.stage.inverse(wanted);
        let phase = self.top_phases.0 - self.stage.phase_rad(control);
        let (old_control, old_phase) = self.old(magnitude);
        let part = self.request.damping;
        (
            old_control + part * (control - old_control),
            old_phase + part * wrapped(phase - old_phase),
        )
    }

    fn entry(&self, magnitude: f64) -> Entry {
        let (low, high) = self.stage.seen;
        let edge = magnitude.clamp(low, high);
        let (mut control, mut phase_rad) = self.damped(edge);
        let mut state = EntryState::Inverted;
        if edge != magnitude {
            let ((old, old_phase), (there, there_phase)) = (self.old(magnitude), self.old(edge));
            control = if there > 0.0 {
                old * control / there
            } else {
                control * magnitude / edge
            };
            phase_rad = old_phase + phase_rad - there_phase;
            state = EntryState::NotSeen;
        } else if self
            .stage
            .gaps
            .iter()
            .any(|&(from, to)| from < control && control < to)
        {
            state = EntryState::InGap;
        } else if self.target.apply(magnitude) - magnitude
            > 0.5 * self.request.table.size.control_step()
        {
            state = EntryState::MovedByFloor;
        }
        let floor = self.request.shaping.floor;
        if control < floor {
            (control, state) = (floor, EntryState::HeldAtFloor);
        }
        Entry {
            magnitude,
            control: control.clamp(0.0, 1.0),
            phase_rad,
            state,
        }
    }
}

/// The same angle within half a turn.
fn wrapped(phase_rad: f64) -> f64 {
    phase_rad - TAU * (phase_rad / TAU).round()
}

/// `(F'(u)^2 step_u^2 + |F|^2 step_p^2) / 12` over `|F|^2`, both averaged over the pairs (W. R. Bennett, "Spectra of
/// quantized signals", Bell Syst. Tech. J., July 1948).
fn rounding_db(fit: &StaticFit, stage: &StageCurve, lookup: &Lookup) -> f64 {
    let size = lookup.size();
    let (mut added, mut power) = (0.0, 0.0);
    for point in &fit.points {
        let control = lookup.control(lookup.word(point.magnitude));
        let step = 0.5 * size.control_step();
        let across = stage.amplitude(control + step) - stage.amplitude(control - step);
        let output = stage.amplitude(control);
        let weight = point.samples as f64;
        added += weight * (across.powi(2) + (output * size.phase_step_rad()).powi(2)) / 12.0;
        power += weight * output * output;
    }
    crate::units::db((added / power).max(f64::MIN_POSITIVE))
}
