//! The main job: a study to its verdict.

use num_complex::Complex64;

use super::advice::{gate_warnings, warnings};
use super::error::StudyError;
use super::hardware::hardware;
use super::load::{Predistortion, Study};
use super::numbers::metrics;
use super::replay::{By, replayed};
use super::result::{CheckResult, Convergence, RateFacts, SignalFacts, StageFacts};
use super::run::{Chain, Run};
use crate::drive::{
    Correction, LookupSize, MAX_FACTOR, Polynomial, RateReason, Scheme, Shape, Shaping,
    oversampling,
};
use crate::map::Map;
use crate::predistort::{Table, TableRequest};
use crate::signal::Source;
use crate::verdict::{Judgement, Measured, Wanted, judge};

/// How far a margin may move when the sampling is doubled, dB.
pub(super) const CONVERGED_DB: f64 = 0.1;

/// Margins past this in both runs do not count, dB: no decision hangs on them, and numerical floors lie there.
pub(super) const FAR_WITHIN_DB: f64 = 30.0;

/// How often the sampling is doubled beyond the first comparison.
const MORE_DOUBLINGS: usize = 2;

/// Oversampled instants past which no further doubling is tried: some tens of seconds of work.
const MOST_INSTANTS: u64 = 200_000_000;

/// Instants to one hold of a table or polynomial.
const INSTANTS_PER_HOLD: usize = 4;

/// Resolution of the spectrum where neither limits nor the study ask for one, as a part of the signal's rate.
const DEFAULT_RESOLUTION: f64 = 1.0 / 512.0;

/// Carries out `study` on `source`, the signal that it names.
///
/// `progress` is told now and then which part of the work is done, 0 to 1.
///
/// # Errors
/// [`StudyError`] where no verdict can be reached.
pub fn check(
    study: &Study,
    source: &mut dyn Source,
    progress: &mut dyn FnMut(f64),
) -> Result<CheckResult, StudyError> {
    check_by(study, source, By::Map, 1, progress)
}

/// As [`check`], the output taken from the map, from a replay of the stage, or from both, with `workers` segments of
/// the replay at a time; the result is the same for any number of them to 1e-9.
///
/// # Errors
/// [`StudyError`] where no verdict can be reached, or nothing can be replayed.
pub fn check_by(
    study: &Study,
    source: &mut dyn Source,
    by: By,
    workers: usize,
    progress: &mut dyn FnMut(f64),
) -> Result<CheckResult, StudyError> {
    let bench = Bench::new(study, source)?;
    bench.check_by(bench.front()?, source, by, workers, progress)
}

/// What stands in front of the scheme in one check.
#[derive(Debug, Clone)]
pub(super) enum Front {
    None,
    Table(Table),
    /// A table so fine, on the track's own clock, that nothing but the inverse itself is seen.
    Inverse(Table),
    Polynomial(Polynomial),
}

impl Front {
    pub(super) fn correction(&self) -> Option<Correction> {
        match self {
            Self::None => None,
            Self::Table(table) => Some(Correction::Table(table.lookup.clone())),
            Self::Inverse(table) => Some(Correction::Instant(table.lookup.clone())),
            Self::Polynomial(polynomial) => Some(Correction::Polynomial(polynomial.clone())),
        }
    }
}

/// Hardware and signal of a study, ready for any number of checks.
#[derive(Debug, Clone)]
pub(super) struct Bench<'a> {
    pub(super) study: &'a Study,
    pub(super) map: Map,
    pub(super) stage: Option<StageFacts>,
    pub(super) signal: SignalFacts,
    wanted: Wanted,
    /// What several checks side by side share.
    pub(super) common: Option<Common>,
}

/// What schemes that are compared share, so that their margins are of the same readings.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Common {
    /// None is sampled at less, Hz.
    pub(super) rate_hz: f64,
    /// Offsets past this are not judged, Hz.
    pub(super) until_hz: f64,
}

impl<'a> Bench<'a> {
    pub(super) fn new(study: &'a Study, source: &mut dyn Source) -> Result<Self, StudyError> {
        let (map, stage) = hardware(study)?;
        if let Scheme::Supply(supply) = &study.scheme
            && let Some(supply_v) = supply.falls_at_v(&map)
        {
            return Err(StudyError::NoWorkingPoint {
                supply_v,
                ohm: supply.modulator.output_ohm,
            });
        }
        Ok(Self {
            study,
            map,
            stage,
            signal: signal_facts(study, source)?,
            wanted: Wanted::of(&study.limits),
            common: None,
        })
    }

    /// The same hardware and signal for another study of the same stage, control and anchor.
    pub(super) fn with_study<'b>(&self, study: &'b Study) -> Bench<'b> {
        Bench {
            study,
            map: self.map.clone(),
            stage: self.stage.clone(),
            signal: self.signal.clone(),
            wanted: self.wanted.clone(),
            common: self.common,
        }
    }

    /// The sample rate that a check behind `front` starts from, Hz.
    pub(super) fn rate_hz(&self, front: &Front) -> f64 {
        self.oversampling(front).0 as f64 * self.signal.rate_hz
    }

    /// What the study itself puts in front of its scheme.
    pub(super) fn front(&self) -> Result<Front, StudyError> {
        Ok(match &self.study.predistort {
            None => Front::None,
            Some(Predistortion::Table(table)) => Front::Table(table.clone()),
            Some(Predistortion::Request(request)) => Front::Table(self.table(request)?),
            Some(Predistortion::Polynomial(polynomial)) => Front::Polynomial(polynomial.clone()),
        })
    }

    /// The inverse of the map in front of the scheme, without a clock or words of its own.
    pub(super) fn inverse(&self) -> Result<Front, StudyError> {
        let depth = LookupSize::DEPTHS.1;
        let request = TableRequest {
            size: LookupSize {
                depth,
                address_bits: LookupSize::BITS.1,
                amplitude_bits: LookupSize::BITS.1,
                phase_bits: LookupSize::BITS.1,
            },
            ..TableRequest::default()
        };
        Ok(Front::Inverse(self.table(&request)?))
    }

    /// The table of `request` for this study.
    pub(super) fn table(&self, request: &TableRequest) -> Result<Table, StudyError> {
        let scheme = &self.study.scheme;
        let shaping = match scheme {
            Scheme::Supply(supply) => supply.shaping,
            // A law of its own has no floor to be followed.
            _ => Shaping {
                shape: Shape::Corner,
                floor: 0.0,
            },
        };
        let behind = scheme.forward(&self.map)?;
        let (_, full) = self.study.table_range();
        let title = &self.study.title;
        Ok(Table::from_map(title, &behind, full, &shaping, request)?)
    }

    /// The factor of the oversampling that `correction` needs, and what asked for it.
    fn oversampling(&self, front: &Front) -> (usize, RateReason) {
        let mut own = oversampling(&self.study.scheme, self.signal.rate_hz, self.wanted.span_hz);
        if let Some(common) = self.common {
            let factor = (common.rate_hz / self.signal.rate_hz * (1.0 - 1e-9)).ceil() as usize;
            let factor = factor.next_power_of_two().min(MAX_FACTOR);
            if factor > own.0 {
                own = (factor, RateReason::Common);
            }
        }
        let held = match front {
            Front::None | Front::Inverse(_) => None,
            Front::Table(table) => Some(table.lookup.rate()),
            Front::Polynomial(polynomial) => Some(polynomial.rate),
        };
        match held.map(|rate| INSTANTS_PER_HOLD * rate) {
            Some(factor) if factor > own.0 => (factor, RateReason::Predistortion),
            _ => own,
        }
    }

    pub(super) fn chain<'b>(
        &'b self,
        front: &Front,
        correction: Option<&'b Correction>,
    ) -> Chain<'b> {
        let study = self.study;
        let resolution_hz = [self.wanted.fine_resolution_hz, study.resolution_hz]
            .into_iter()
            .flatten()
            .reduce(f64::min)
            .unwrap_or(DEFAULT_RESOLUTION * self.signal.rate_hz);
        Chain {
            study,
            map: &self.map,
            correction,
            factor: self.oversampling(front).0,
            wanted: &self.wanted,
            resolution_hz,
            evm_band_hz: study
                .limits
                .channel_hz
                .or(study.limits.authorized_bandwidth_hz)
                .unwrap_or(self.signal.rate_hz),
            signal_samples: self.signal.samples,
            replay: None,
        }
    }

    /// The verdict at one factor of oversampling, without a second one to hold it against.
    pub(super) fn judge_once(
        &self,
        front: &Front,
        source: &mut dyn Source,
    ) -> Result<Judgement, StudyError> {
        let correction = front.correction();
        let run = self
            .chain(front, correction.as_ref())
            .run(source, &mut |_| {})?;
        Ok(self.verdict_of(&run))
    }

    /// As [`Bench::check`], or by replay, with `workers` segments at a time.
    pub(super) fn check_by(
        &self,
        front: Front,
        source: &mut dyn Source,
        by: By,
        workers: usize,
        progress: &mut dyn FnMut(f64),
    ) -> Result<CheckResult, StudyError> {
        match by {
            By::Map => self.check(front, source, progress),
            By::Replay | By::Both => replayed(self, &front, source, by, workers, progress),
        }
    }

    /// The study by map, at the factor of oversampling at which its margins stand still.
    pub(super) fn check(
        &self,
        front: Front,
        source: &mut dyn Source,
        progress: &mut dyn FnMut(f64),
    ) -> Result<CheckResult, StudyError> {
        let study = self.study;
        if let Front::Table(table) = &front {
            let (control, full) = study.table_range();
            if table.control != control {
                return Err(StudyError::OtherControl {
                    table: table.control.name(),
                    given: control.name(),
                    scheme: study.scheme.name(),
                });
            }
            if (table.full_control / full - 1.0).abs() > 1e-9 {
                return Err(StudyError::OtherRange {
                    table_v: table.full_control,
                    given_v: full,
                });
            }
        }
        let correction = front.correction();
        let (factor, reason) = self.oversampling(&front);
        let mut chain = self.chain(&front, correction.as_ref());
        let signal = &self.signal;

        // The chosen factor is held against half of it, and doubled while that moves the margins.
        let instants = signal.samples as f64 * factor as f64;
        let mut done = 0.0;
        let mut tick = |count: u64| {
            done += count as f64 / instants / 3.0;
            progress(done.min(1.0));
        };
        let mut convergence = Convergence {
            against_factor: factor,
            moved_db: f64::NAN,
        };
        chain.factor = (factor / 2).max(1);
        let mut run = chain.run(source, &mut tick)?;
        let mut judgement = self.verdict_of(&run);
        for _ in 0..=MORE_DOUBLINGS {
            let instants = 2 * chain.factor as u64 * signal.samples;
            if 2 * chain.factor > MAX_FACTOR || (chain.factor >= factor && instants > MOST_INSTANTS)
            {
                break;
            }
            chain.factor *= 2;
            let finer = chain.run(source, &mut tick)?;
            let finer_judgement = self.verdict_of(&finer);
            convergence = Convergence {
                against_factor: run.factor,
                moved_db: largest_move(&judgement, &finer_judgement),
            };
            (run, judgement) = (finer, finer_judgement);
            if convergence.moved_db <= CONVERGED_DB {
                break;
            }
        }
        let metrics = metrics(study, &run, &judgement)?;
        let mut result = CheckResult {
            study: study.clone(),
            rate: RateFacts {
                factor: run.factor,
                rate_hz: run.rate_hz,
                reason,
                samples: run.output_envelope.samples,
                convergence,
            },
            signal: signal.clone(),
            map: self.map.clone(),
            stage: self.stage.clone(),
            stress: run.stress,
            table: match front {
                Front::Table(table) => Some(table),
                Front::None | Front::Inverse(_) | Front::Polynomial(_) => None,
            },
            metrics,
            output_spectrum: run.output_spectrum,
            wanted_spectrum: run.wanted_spectrum,
            peak_spectra: run.peak_spectra,
            output_envelope: run.output_envelope,
            wanted_envelope: run.wanted_envelope,
            control_density: run.control_density,
            symbols: run.symbols,
            notch: run.notch,
            gate: run.gate,
            replay: None,
            warnings: Vec::new(),
            judgement,
        };
        result.warnings = warnings(&result, run.held);
        result.warnings.extend(gate_warnings(&result));
        Ok(result)
    }

    pub(super) fn verdict_of(&self, run: &Run) -> Judgement {
        let until_hz = self.common.map_or(f64::INFINITY, |common| common.until_hz);
        let fine = run.output_spectrum.within(until_hz);
        let peak_hold: Vec<_> = run
            .peak_spectra
            .iter()
            .map(|s| s.within(until_hz))
            .collect();
        let symbols = run.symbols.as_ref();
        let measured = Measured {
            fine: &fine,
            peak_hold: &peak_hold,
            mean_w: run.output_envelope.mean_w,
            peak_w: run.output_envelope.peak_w,
            evm_percent: Some(symbols.map_or(run.errors.evm_percent, |s| s.evm_percent)),
            evm_peak_percent: Some(
                symbols.map_or(run.errors.evm_peak_percent, |s| s.evm_peak_percent),
            ),
            evm_p95_percent: symbols.map(|s| s.evm_p95_percent),
            evm_p99_percent: symbols.map(|s| s.evm_p99_percent),
            modulation: None,
            // At full supply: a linear stage keeps their ratio at any supply, a curved one about.
            harmonics_dbc: self
                .stage
                .as_ref()
                .map(|facts| &facts.orbit.harmonics_dbc[..]),
            stress: run.stress,
        };
        judge(&measured, &self.study.limits)
    }
}

/// Reads the signal once: its length may not be known before, and its level must be.
fn signal_facts(study: &Study, source: &mut dyn Source) -> Result<SignalFacts, StudyError> {
    source.rewind()?;
    let mut block = vec![Complex64::ZERO; 1 << 16];
    let (mut samples, mut square, mut peak) = (0u64, 0.0, 0.0f64);
    loop {
        let count = source.read(&mut block)?;
        if count == 0 {
            break;
        }
        samples += count as u64;
        for sample in &block[..count] {
            let power = sample.norm_sqr();
            square += power;
            peak = peak.max(power);
        }
    }
    source.rewind()?;
    if peak == 0.0 {
        return Err(StudyError::SilentSignal);
    }
    let rate_hz = source.rate_hz();
    Ok(SignalFacts {
        file: study.signal.file.clone(),
        rate_hz,
        samples,
        duration_s: samples as f64 / rate_hz,
        peak: peak.sqrt(),
        rms: (square / samples as f64).sqrt(),
    })
}

/// The largest movement of any margin that counts between two verdicts on the same limits, dB. A check that is
/// decided in only one of them counts as infinite.
fn largest_move(before: &Judgement, after: &Judgement) -> f64 {
    let pairs = before.verdict.checks.iter().map(|check| {
        let other = after
            .verdict
            .checks
            .iter()
            .find(|other| other.name == check.name && other.set == check.set);
        match (check.margin_db, other.and_then(|other| other.margin_db)) {
            (Some(a), Some(b)) if a.min(b) > FAR_WITHIN_DB => 0.0,
            (Some(a), Some(b)) => (a - b).abs(),
            (None, None) => 0.0,
            _ => f64::INFINITY,
        }
    });
    pairs.fold(0.0, f64::max)
}
