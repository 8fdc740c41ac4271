//! One signal through the whole chain at one oversampling factor, block by block, in two passes.
//!
//! The first pass takes spectra, powers and the alignment of output and wanted signal; the second runs
//! the same chain again, or what was kept of a short signal, and holds the aligned output against the wanted
//! signal. Memory does not grow with a long one.

use num_complex::Complex64;

use super::collect::Collected;
use super::error::StudyError;
use super::kept::{Kept, MOST, MOST_REPLAYED, NotchWindow};
use super::load::Study;
use super::result::{GateTrain, Notch};
use crate::drive::{Correction, GateFigures, Scheme, Track};
use crate::map::Map;
use crate::metrics::{
    Alignment, AlignmentMeter, EnvelopeFigures, EnvelopeMeter, ErrorFigures, ErrorMeter, Hold,
    Spectrum, SpectrumMeter, SpectrumPlan, SymbolFigures,
};
use crate::orbit::Network;
use crate::signal::{Edge, Oversampled, Source};
use crate::transmit::{Energy, MapTransmitter, ReplayRequest, ReplayTransmitter};
use crate::verdict::{Stress, Wanted};

/// Samples a block of the chain.
const BLOCK: usize = 1 << 14;

/// Signal samples dropped at the start and at the end, where the interpolation sees past the file. A twentieth
/// of a short signal.
const EDGE: u64 = 512;

/// Bins of the control's density.
pub const DENSITY_BINS: usize = 100;

/// Signal samples shown to each side of the deepest notch.
const NOTCH_SAMPLES: usize = 12;

/// What to run.
#[derive(Debug, Clone, Copy)]
pub struct Chain<'a> {
    pub study: &'a Study,
    pub map: &'a Map,
    /// What stands in front of the scheme.
    pub correction: Option<&'a Correction>,
    pub factor: usize,
    pub wanted: &'a Wanted,
    /// Resolution of the mean spectra, Hz.
    pub resolution_hz: f64,
    /// Full width in which the EVM is taken, Hz.
    pub evm_band_hz: f64,
    /// Samples of the signal at its own rate.
    pub signal_samples: u64,
    /// The stage, where it is replayed; else the map stands for it.
    pub replay: Option<Replayed<'a>>,
}

/// A stage that is replayed.
#[derive(Debug, Clone, Copy)]
pub struct Replayed<'a> {
    pub network: &'a Network,
    /// Segments at a time.
    pub workers: usize,
}

/// A replay against the map on the same track.
#[derive(Debug, Clone, Copy)]
pub struct AgainstMap {
    pub alignment: Alignment,
    pub errors: ErrorFigures,
    /// Carrier cycles replayed.
    pub cycles: u64,
}

/// What makes an output of a track.
enum Transmitter<'a> {
    Map(Box<MapTransmitter<'a>>),
    Replay(Box<ReplayTransmitter<'a>>),
    /// Outputs of a replay before, from the first instant on.
    Replayed(&'a [Complex64]),
}

/// What a pass leaves.
struct Passed {
    energy: Energy,
    held: u64,
    stress: Option<Stress>,
    cycles: u64,
    gate: Option<GateFigures>,
    /// The gate's edges from the signal's first sample to its last; only the first [`GateTrain::MOST`] of them.
    edges: Vec<Edge>,
}

/// What came out.
#[derive(Debug, Clone)]
pub struct Run {
    pub factor: usize,
    pub rate_hz: f64,
    pub output_spectrum: Spectrum,
    pub wanted_spectrum: Spectrum,
    pub peak_spectra: Vec<Spectrum>,
    pub output_envelope: EnvelopeFigures,
    pub wanted_envelope: EnvelopeFigures,
    pub alignment: Alignment,
    pub errors: ErrorFigures,
    pub energy: Energy,
    /// Part of all instants whose control lay outside the map.
    pub held: f64,
    /// What the switch had to stand, where the map knows.
    pub stress: Option<Stress>,
    pub control_density: Vec<f64>,
    pub notch: Notch,
    /// The pulses, of a scheme that gates the stage.
    pub gate: Option<GateTrain>,
    /// Errors of symbols, where the study states the signal's format.
    pub symbols: Option<SymbolFigures>,
    /// The replay against the map, where there was one.
    pub against_map: Option<AgainstMap>,
}

/// The instants of a block that count: start and end of the signal are left out.
struct Piece<'a> {
    /// Index of the first instant since the start of the chain.
    first: u64,
    track: &'a Track,
    output_v: &'a [Complex64],
    /// What the map makes of the same track, beside a replay; else empty.
    by_map_v: &'a [Complex64],
    range: std::ops::Range<usize>,
}

impl Piece<'_> {
    fn wanted(&self) -> &[Complex64] {
        &self.track.wanted[self.range.clone()]
    }

    fn output_v(&self) -> &[Complex64] {
        &self.output_v[self.range.clone()]
    }

    fn by_map_v(&self) -> &[Complex64] {
        self.by_map_v.get(self.range.clone()).unwrap_or(&[])
    }
}

impl Chain<'_> {
    fn rate_hz(&self, source: &dyn Source) -> f64 {
        source.rate_hz() * self.factor as f64
    }

    /// Instants until nothing shows the start any more.
    fn settling(&self, rate_hz: f64) -> usize {
        let own = self.study.scheme.settling(rate_hz);
        own + self.correction.map_or(0, |correction| {
            correction.span() * self.factor.div_ceil(correction.rate())
        })
    }

    /// First and last instant (exclusive) that count.
    fn span(&self, rate_hz: f64) -> (u64, u64) {
        let edge = EDGE.min(self.signal_samples / 20) * self.factor as u64;
        let settling = self.settling(rate_hz) as u64;
        (
            edge + settling,
            (self.signal_samples * self.factor as u64).saturating_sub(edge),
        )
    }

    /// Runs the chain once over the whole source and hands out what counts. Outputs in `replayed` stand for a replay.
    fn pass(
        &self,
        source: &mut dyn Source,
        replayed: Option<&[Complex64]>,
        tick: &mut dyn FnMut(u64),
        mut take: impl FnMut(&Piece<'_>) -> Result<(), StudyError>,
    ) -> Result<Passed, StudyError> {
        let rate_hz = self.rate_hz(source);
        let (start, end) = self.span(rate_hz);
        let study = self.study;
        let full = study.full_control();
        let anchor = study.hardware.anchor();
        let scheme = match (&study.scheme, self.replay) {
            // A replay places every edge itself.
            (Scheme::Width(width), Some(_)) => Scheme::Width(width.without_timing()),
            (scheme, _) => scheme.clone(),
        };
        let mut drive = scheme.drive(self.map, anchor, study.signal.level, full, rate_hz);
        if let Some(correction) = self.correction {
            drive = drive.corrected(correction, self.factor);
        }
        let by_map = || MapTransmitter::new(self.map, &study.scheme.modulator(), rate_hz);
        let mut transmitter = match (self.replay, replayed) {
            (None, _) => Transmitter::Map(Box::new(by_map())),
            (Some(_), Some(replayed)) => Transmitter::Replayed(replayed),
            (Some(replay), None) => {
                Transmitter::Replay(Box::new(ReplayTransmitter::new(ReplayRequest {
                    network: replay.network,
                    scheme: &study.scheme,
                    map: self.map,
                    rate_hz,
                    counted: (start, end),
                    workers: replay.workers,
                })?))
            }
        };
        let mut beside = self.replay.map(|_| by_map());
        let mut oversampled = Oversampled::new(source, self.factor)?;
        let mut samples = vec![Complex64::ZERO; BLOCK];
        let (mut fresh, mut track) = (Track::default(), Track::default());
        let (mut output_v, mut by_map_v) = (Vec::with_capacity(BLOCK), Vec::new());
        let mut first = 0u64;
        let mut edges: Vec<Edge> = Vec::new();
        let mut ended = false;
        // A gate is told to its end, though what it does there is not measured.
        while !ended && (first < end || !edges.is_empty()) {
            let count = oversampled.read(&mut samples)?;
            ended = count == 0;
            fresh.clear();
            track.clear();
            output_v.clear();
            by_map_v.clear();
            drive.push(&samples[..count], &mut fresh);
            let room = GateTrain::MOST - edges.len();
            edges.extend(fresh.gate.iter().take(room));
            match &mut transmitter {
                Transmitter::Map(_) | Transmitter::Replayed(_) => {
                    std::mem::swap(&mut fresh, &mut track);
                }
                Transmitter::Replay(replay) if ended => {
                    replay.finish(&mut track, &mut output_v)?;
                }
                Transmitter::Replay(replay) => {
                    replay.push(&fresh, &mut track, &mut output_v)?;
                }
            }
            let length = track.len();
            let inside = |at: u64| (at.clamp(first, first + length as u64) - first) as usize;
            let range = inside(start)..inside(end);
            match &mut transmitter {
                Transmitter::Map(map) => map.push(&track, range.clone(), &mut output_v),
                Transmitter::Replayed(replayed) => {
                    let from = (first as usize).min(replayed.len());
                    output_v
                        .extend_from_slice(&replayed[from..(from + length).min(replayed.len())]);
                    // Only the very end can be missing, and it does not count.
                    output_v.resize(length, Complex64::ZERO);
                }
                Transmitter::Replay(_) => {}
            }
            if let Some(map) = &mut beside {
                map.push(&track, range.clone(), &mut by_map_v);
            }
            if !range.is_empty() {
                take(&Piece {
                    first,
                    track: &track,
                    output_v: &output_v,
                    by_map_v: &by_map_v,
                    range,
                })?;
            }
            first += length as u64;
            tick(count as u64);
        }
        let (energy, held, highest, cycles) = match &transmitter {
            Transmitter::Replayed(_) => (Energy::default(), 0, 0.0, 0),
            Transmitter::Map(map) => (map.energy(), map.held(), map.highest_control(), 0),
            Transmitter::Replay(replay) => {
                let held = beside.as_ref().map_or(0, MapTransmitter::held);
                (
                    replay.energy(),
                    held,
                    replay.highest_control(),
                    replay.cycles(),
                )
            }
        };
        let stress = self.map.stress_up_to(highest);
        Ok(Passed {
            energy,
            held,
            stress: stress.map(|(peak_v, peak_a)| Stress { peak_v, peak_a }),
            cycles,
            gate: drive.gate_figures(),
            edges,
        })
    }

    fn meters(&self, rate_hz: f64) -> Result<(SpectrumMeter, Vec<SpectrumMeter>), StudyError> {
        let load_ohm = self.map.load_ohm();
        let meter = |resolution_hz, hold| {
            let plan =
                SpectrumPlan::for_resolution(rate_hz, resolution_hz, self.study.window, hold)?;
            let (start, end) = self.span(rate_hz);
            if (end.saturating_sub(start)) < plan.length as u64 {
                return Err(StudyError::SignalTooShort {
                    given: self.signal_samples,
                    needed: (plan.length as u64 + start) / self.factor as u64
                        + EDGE.min(self.signal_samples / 20)
                        + 1,
                    resolution_hz,
                });
            }
            Ok(SpectrumMeter::new(plan, rate_hz, load_ohm)?)
        };
        let fine = meter(self.resolution_hz, Hold::None)?;
        let peaks = self
            .wanted
            .peak_hold_resolutions_hz
            .iter()
            .map(|&resolution_hz| meter(resolution_hz, Hold::Peak))
            .collect::<Result<_, _>>()?;
        Ok((fine, peaks))
    }

    /// Both passes. `tick` is told how many oversampled instants were done.
    ///
    /// # Errors
    /// [`StudyError`] of any step.
    pub fn run(
        &self,
        source: &mut dyn Source,
        tick: &mut dyn FnMut(u64),
    ) -> Result<Run, StudyError> {
        let rate_hz = self.rate_hz(source);
        let load_ohm = self.map.load_ohm();
        let (mut output_meter, mut peak_meters) = self.meters(rate_hz)?;
        let mut wanted_meter = output_meter.clone();
        let (start, end) = self.span(rate_hz);
        let keeps = end.saturating_sub(start) <= MOST;
        let mut kept = Kept {
            first: start,
            ..Kept::default()
        };
        let mut output_envelope = EnvelopeMeter::new(load_ohm);
        let mut wanted_envelope = EnvelopeMeter::new(load_ohm);
        let search_s = self.settling(rate_hz) as f64 / rate_hz;
        let mut alignment = AlignmentMeter::new(rate_hz, search_s)?;
        let mut density = vec![0u64; DENSITY_BINS];
        let full = self.study.full_control();
        let mut deepest = (f64::INFINITY, 0u64);
        let mut map_alignment = match self.replay {
            Some(_) => Some(AlignmentMeter::new(rate_hz, search_s)?),
            None => None,
        };
        let instants = self.signal_samples * self.factor as u64;
        let mut replayed =
            (self.replay.is_some() && !keeps && instants <= MOST_REPLAYED).then(Vec::new);
        let passed = self.pass(source, None, tick, |piece| {
            if let Some(replayed) = &mut replayed {
                replayed.resize(piece.first as usize, Complex64::ZERO);
                replayed.extend_from_slice(piece.output_v);
            }
            if let Some(meter) = &mut map_alignment {
                meter.push(piece.by_map_v(), piece.output_v())?;
            }
            output_meter.push(piece.output_v());
            for meter in &mut peak_meters {
                meter.push(piece.output_v());
            }
            wanted_meter.push(piece.wanted());
            output_envelope.push(piece.output_v());
            wanted_envelope.push(piece.wanted());
            alignment.push(piece.wanted(), piece.output_v())?;
            if keeps {
                let range = piece.range.clone();
                kept.wanted.extend_from_slice(piece.wanted());
                kept.output_v.extend_from_slice(piece.output_v());
                kept.by_map_v.extend_from_slice(piece.by_map_v());
                kept.asked
                    .extend_from_slice(&piece.track.asked[range.clone()]);
                kept.control.extend_from_slice(&piece.track.control[range]);
            }
            for at in piece.range.clone() {
                let fraction = piece.track.control[at] / full;
                let bin = (fraction * DENSITY_BINS as f64) as usize;
                density[bin.min(DENSITY_BINS - 1)] += 1;
                let magnitude = piece.track.wanted[at].norm_sqr();
                if magnitude < deepest.0 {
                    deepest = (magnitude, piece.first + at as u64);
                }
            }
            Ok(())
        })?;
        let Passed {
            energy,
            held,
            stress,
            cycles,
            gate,
            edges,
        } = passed;
        let output_envelope = output_envelope.finish().ok_or(StudyError::SilentSignal)?;
        let wanted_envelope = wanted_envelope.finish().ok_or(StudyError::SilentSignal)?;
        let alignment = alignment.finish()?;
        let map_alignment = map_alignment.map(AlignmentMeter::finish).transpose()?;

        let mut map_errors = match map_alignment {
            Some(alignment) => Some(ErrorMeter::new(alignment, rate_hz, None)?),
            None => None,
        };
        let mut errors = ErrorMeter::new(alignment, rate_hz, Some(self.evm_band_hz))?;
        let mut collected = self
            .study
            .signal
            .format
            .map(|format| Collected::new(format, self.factor, alignment.delay_s * rate_hz));
        let mut notch = Notch::default();
        let window = NotchWindow {
            middle: deepest.1,
            reach: (NOTCH_SAMPLES * self.factor) as u64,
            rate_hz,
            level: self.study.signal.level,
            full,
        };
        let mut again = |first: u64,
                         wanted: &[Complex64],
                         output_v: &[Complex64],
                         by_map_v: &[Complex64],
                         asked: &[f64],
                         control: &[f64]|
         -> Result<(), StudyError> {
            if let Some(meter) = &mut map_errors {
                meter.push(by_map_v, output_v)?;
            }
            errors.push(wanted, output_v)?;
            if let Some(collected) = &mut collected {
                collected.push(wanted, output_v);
            }
            window.take(first, wanted, asked, control, &mut notch);
            Ok(())
        };
        if keeps {
            let Kept {
                first,
                wanted,
                output_v,
                by_map_v,
                asked,
                control,
            } = &kept;
            again(*first, wanted, output_v, by_map_v, asked, control)?;
            tick(self.signal_samples * self.factor as u64);
        } else {
            self.pass(source, replayed.as_deref(), tick, |piece| {
                let range = piece.range.clone();
                again(
                    piece.first + range.start as u64,
                    piece.wanted(),
                    piece.output_v(),
                    piece.by_map_v(),
                    &piece.track.asked[range.clone()],
                    &piece.track.control[range],
                )
            })?;
        }
        drop(kept);

        let total: u64 = density.iter().sum();
        let mut wanted_spectrum = wanted_meter.finish()?;
        let gain = alignment.gain.norm_sqr();
        for density in &mut wanted_spectrum.mean_w_per_hz {
            *density *= gain;
        }
        Ok(Run {
            factor: self.factor,
            rate_hz,
            output_spectrum: output_meter.finish()?,
            wanted_spectrum,
            peak_spectra: peak_meters
                .into_iter()
                .map(SpectrumMeter::finish)
                .collect::<Result<_, _>>()?,
            output_envelope,
            wanted_envelope,
            alignment,
            errors: errors.finish()?,
            energy,
            held: held as f64 / total.max(1) as f64,
            stress,
            control_density: density
                .iter()
                .map(|&n| n as f64 / total.max(1) as f64)
                .collect(),
            notch,
            gate: gate.map(|figures| GateTrain { figures, edges }),
            against_map: match (map_alignment, map_errors) {
                (Some(alignment), Some(meter)) => Some(AgainstMap {
                    alignment,
                    errors: meter.finish()?,
                    cycles,
                }),
                _ => None,
            },
            symbols: collected
                .map(|collected| collected.finish(rate_hz / self.factor as f64))
                .transpose()?,
        })
    }
}
