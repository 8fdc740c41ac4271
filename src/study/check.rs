//! The main job: a study to its verdict.

use num_complex::Complex64;

use super::error::StudyError;
use super::load::{Hardware, Predistortion, Study};
use super::parts::EfficiencyParts;
use super::replay::{By, replayed};
use super::result::{CheckResult, Convergence, Metrics, RateFacts, SignalFacts, StageFacts};
use super::run::{Chain, Run};
use super::shapes::{joined_shapes, shapes};
use super::validity::of_scheme;
use super::warning::Warning;
use crate::drive::{
    AngleReach, ClassBScheme, Combining, Correction, GateFigures, LevelsScheme, LookupSize,
    MAX_FACTOR, OutphaseScheme, Polynomial, RateReason, Scheme, Shape, Shaping, WidthLaw,
    oversampling,
};
use crate::map::{AngleSweep, Control, Map, Origin, Sweep};
use crate::math::edges::CLEAN_BAND;
use crate::metrics::{ChannelFilter, adjacent_channels, occupied_bandwidth};
use crate::orbit::{Drive, Gating, Joined, Joint, Network, OrbitError};
use crate::predistort::{Table, TableRequest};
use crate::signal::Source;
use crate::stage::Stage;
use crate::units::dbm_from_watt;
use crate::verdict::{Judgement, Measured, Wanted, judge};

/// Points of a map solved for a check.
const MAP_POINTS: usize = 201;

/// Points of a map over the angle of two joined stages: a quarter of a degree apart.
const ANGLE_POINTS: usize = 721;

/// Points of the width maps of a curved stage at lower supplies.
const PLANE_POINTS: usize = 101;

/// Their distance while a rail settles, as a part of the full supply.
const PLANE_DISTANCE: f64 = 0.1;

/// How far a margin may move when the sampling is doubled, dB.
const CONVERGED_DB: f64 = 0.1;

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

/// Joined branches that do not cancel below this part of full output fill the deepest notches.
const FILLED_NOTCH: f64 = 0.01;

/// Fewer segments than this are worth a warning.
const FEW_SEGMENTS: u64 = 25;

/// A stage that settles slower than this part of the signal's sample period has memory worth a warning:
/// a lag of a hundredth of a sample period costs about -40 dB at the edge of the band.
const SLOW: f64 = 0.01;

/// Modes that leave more than this of a gate's transition stand for it poorly.
const POOR_FIT: f64 = 0.1;

/// A pulse sequence that ends this part of the signal's duration before or after it is worth a warning.
const OTHER_LENGTH: f64 = 0.01;

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

/// The stage of `study`, its pulses anchored as the scheme says.
pub(super) fn stage_of(study: &Study) -> Option<Stage> {
    let Hardware::Stage(stage) = &study.hardware else {
        return None;
    };
    let mut stage = Stage::clone(stage);
    if let Some(anchor) = study.scheme.anchor() {
        stage.driver.anchor = anchor;
    }
    Some(stage)
}

/// The map, and the stage at full supply where there is one.
fn hardware(study: &Study) -> Result<(Map, Option<StageFacts>), StudyError> {
    let scheme = &study.scheme;
    if let Hardware::Map(map) = &study.hardware {
        let own = straight(scheme, map)?;
        return Ok((own.unwrap_or_else(|| Map::clone(map)), None));
    }
    let stage = &stage_of(study).ok_or(StudyError::NoStage)?;
    if let Scheme::Outphase(OutphaseScheme {
        combining: Combining::Joined(joined),
        gain_mismatch_db,
        ..
    }) = scheme
    {
        return joined_hardware(stage, &joined.joint, *gain_mismatch_db);
    }
    let network = Network::new(stage)?;
    let map = match scheme.control() {
        Control::Supply => Sweep::full(&network, Control::Supply, MAP_POINTS)?,
        Control::Width => Sweep::full(&network, Control::Width, MAP_POINTS)?,
        // Only full output is needed.
        Control::Drive | Control::Angle => {
            let full_v = stage.supply_v;
            Sweep::even(&network, Control::Supply, 0.5 * full_v, full_v, 2)?
        }
    }
    .solve(&network)?;
    let map = match scheme {
        Scheme::Levels(levels) if stage.is_curved() => {
            let planes = supply_planes(levels, stage.supply_v)
                .into_iter()
                .map(|supply_v| {
                    let mut sweep = Sweep::full(&network, Control::Width, PLANE_POINTS)?;
                    sweep.supply_v = supply_v;
                    sweep.solve(&network)
                })
                .collect::<Result<_, _>>()?;
            map.with_planes(planes)
        }
        _ => map,
    };
    let map = straight(scheme, &map)?.unwrap_or(map);
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    let map = match scheme {
        Scheme::Burst(_) => map.with_gating(gating(&network, stage.supply_v, &drive)?),
        _ => map,
    };
    let facts = StageFacts {
        orbit: network.orbit(stage.supply_v, &drive)?,
        waveform: network.waveform(stage.supply_v, &drive, 240)?,
        settling_s: network.settling_s(&drive),
        shapes: shapes(&network, scheme, &map),
    };
    Ok((map, Some(facts)))
}

/// The map of two of `stage` over their angle, and what they do at full output. The front end knows nothing of the
/// second branch's lower gain.
fn joined_hardware(
    stage: &Stage,
    joint: &Joint,
    gain_mismatch_db: f64,
) -> Result<(Map, Option<StageFacts>), StudyError> {
    let actual = Joined::new(
        stage,
        &Joint {
            gain_mismatch_db,
            ..*joint
        },
    )?;
    let mut map = AngleSweep::full(&actual, ANGLE_POINTS)?.solve(&actual)?;
    if gain_mismatch_db != 0.0 {
        let nominal = Joined::new(stage, joint)?;
        map = map.with_nominal(AngleSweep::full(&nominal, ANGLE_POINTS)?.solve(&nominal)?);
    }
    let angle_rad = AngleReach::of(map.known()).full_rad;
    let (supply_v, duty) = (stage.supply_v, stage.driver.duty);
    let facts = StageFacts {
        orbit: actual.orbit(supply_v, duty, angle_rad)?,
        waveform: actual.waveform(supply_v, duty, angle_rad, 120)?,
        settling_s: actual.settling_s(angle_rad),
        shapes: joined_shapes(&actual, angle_rad),
    };
    Ok((map, Some(facts)))
}

/// How a stage answers its gate: by its modes where it has them, else by its slowest time constant.
fn gating(network: &Network, supply_v: f64, drive: &Drive) -> Result<Gating, StudyError> {
    Ok(match network.gating(supply_v, drive)? {
        Some(gating) => gating,
        None => {
            let settling_s = network.settling_s(drive);
            if !settling_s.is_finite() {
                return Err(OrbitError::NeverSettles.into());
            }
            Gating::of_time_constants(settling_s, settling_s)
        }
    })
}

/// The lower supplies at which the width map of a curved stage is solved, rising: the rails, and where these settle
/// slowly or lie far apart, supplies between them.
fn supply_planes(levels: &LevelsScheme, full_v: f64) -> Vec<f64> {
    let rails = levels.rails.parts(full_v);
    let mut planes = Vec::new();
    for pair in rails.windows(2) {
        let steps = if levels.settling_s > 0.0 {
            ((pair[1] - pair[0]) / PLANE_DISTANCE).ceil().max(1.0)
        } else {
            1.0
        };
        for step in 0..steps as usize {
            planes.push((pair[0] + (pair[1] - pair[0]) * step as f64 / steps) * full_v);
        }
    }
    planes
}

/// The straight map of a scheme over the drive, from the last point of `map`.
fn straight(scheme: &Scheme, map: &Map) -> Result<Option<Map>, StudyError> {
    let Some(top) = map.points().last() else {
        return Ok(None);
    };
    let (frequency_hz, load_ohm) = (map.frequency_hz(), map.load_ohm());
    Ok(match scheme {
        Scheme::ClassB(_) => Some(ClassBScheme::map(
            frequency_hz,
            load_ohm,
            map.origin(),
            top,
        )?),
        Scheme::Outphase(_) => {
            let made = OutphaseScheme::map(frequency_hz, load_ohm, map.origin(), top)?;
            // Both stages deliver the same whatever of it the combiner passes on.
            let full_w = made.full_amplitude_v().powi(2) / (2.0 * load_ohm);
            Some(made.with_generated_w(full_w))
        }
        _ => None,
    })
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

pub(super) fn metrics(
    study: &Study,
    run: &Run,
    judgement: &Judgement,
) -> Result<Metrics, StudyError> {
    let acpr = if judgement.acpr.is_empty() {
        default_acpr(study, run)
    } else {
        judgement.acpr.clone()
    };
    let symbols = run.symbols.as_ref();
    let known = |efficiency: f64| efficiency.is_finite().then_some(efficiency);
    Ok(Metrics {
        power_dbm: dbm_from_watt(run.output_envelope.mean_w),
        peak_power_dbm: dbm_from_watt(run.output_envelope.peak_w),
        papr_db: run.output_envelope.papr_db,
        occupied_hz: occupied_bandwidth(&run.output_spectrum, 0.99)?.width_hz(),
        evm_percent: symbols.map_or(run.errors.evm_percent, |s| s.evm_percent),
        evm_peak_percent: symbols.map_or(run.errors.evm_peak_percent, |s| s.evm_peak_percent),
        evm_p95_percent: symbols.map(|s| s.evm_p95_percent),
        evm_of: if symbols.is_some() {
            "symbols"
        } else {
            "waveform"
        },
        waveform_evm_percent: run.errors.evm_percent,
        evm_band_hz: run.errors.band_hz,
        nmse_db: run.errors.nmse_db,
        delay_s: run.alignment.delay_s,
        gain_v: run.alignment.gain.norm(),
        gain_deg: run.alignment.gain.arg().to_degrees(),
        acpr,
        mask: judgement.mask.clone(),
        efficiency: known(run.energy.efficiency()),
        stage_efficiency: known(run.energy.stage_efficiency()),
        efficiency_parts: EfficiencyParts::of(&run.energy),
    })
}

/// Where no limit asks for neighbours: two equal channels to each side, where the channel's width is known.
fn default_acpr(study: &Study, run: &Run) -> Vec<crate::metrics::AdjacentChannel> {
    let Some(channel_hz) = study
        .limits
        .channel_hz
        .or(study.limits.authorized_bandwidth_hz)
    else {
        return Vec::new();
    };
    let filter = ChannelFilter::Flat {
        bandwidth_hz: channel_hz,
    };
    let neighbours = [(channel_hz, filter), (2.0 * channel_hz, filter)];
    adjacent_channels(&run.output_spectrum, &filter, &neighbours).unwrap_or_default()
}

/// Steps of the grid that the narrowest pulse must have: a tenth of its amplitude to a step, and two edges.
const GRID_STEPS: f64 = 10.0;

/// Whether the deepest notch is narrower than the grid or the shortest pulse can follow.
fn coarse_grid(result: &CheckResult) -> Option<Warning> {
    let Scheme::Width(scheme) = result.scheme() else {
        return None;
    };
    let carrier_hz = result.map.frequency_hz();
    let asked = result.notch.asked.iter().copied().reduce(f64::min)?;
    let notch_s = asked * result.study.full_control() / carrier_hz;
    let grid_s = scheme.grid_s.unwrap_or(0.0);
    (notch_s < GRID_STEPS * grid_s || notch_s < scheme.shortest_s).then_some(
        Warning::GridTooCoarse {
            notch_s,
            grid_s,
            shortest_s: scheme.shortest_s,
        },
    )
}

/// What the gate of bursts could not do well.
pub(super) fn gate_warnings(result: &CheckResult) -> Vec<Warning> {
    let mut warnings = Vec::new();
    let Some(train) = &result.gate else {
        return warnings;
    };
    let GateFigures {
        edges,
        hurried,
        overloads,
        shortest_s,
        transition_s,
        fit,
    } = train.figures;
    // A replay has the transitions of the stage, whatever its modes.
    let by_map = result.replay.is_none();
    if by_map && hurried > 0 {
        warnings.push(Warning::HurriedGate {
            fraction: hurried as f64 / edges as f64,
            shortest_s,
            transition_s,
        });
    }
    if by_map && fit > POOR_FIT {
        warnings.push(Warning::PoorTransition { left: fit });
    }
    if overloads > 0 {
        warnings.push(Warning::OverloadedShaping { ticks: overloads });
    }
    if let Scheme::Burst(burst) = result.scheme()
        && burst.transitions_s.is_some()
        && !by_map
    {
        warnings.push(Warning::OwnTransitions);
    }
    if let Scheme::Burst(burst) = result.scheme()
        && let Some(pulses) = &burst.pulses
    {
        let end_s = pulses.start_s + pulses.sequence.end_s;
        let signal_s = result.signal.duration_s;
        if (end_s - signal_s).abs() > OTHER_LENGTH * signal_s {
            warnings.push(Warning::PulsesOfOtherLength { end_s, signal_s });
        }
    }
    if let Scheme::Burst(burst) = result.scheme()
        && burst.filter.is_none()
        && burst.rate_hz > 0.0
    {
        warnings.push(Warning::BurstsOutOfSight {
            rate_hz: burst.rate_hz,
            seen_hz: CLEAN_BAND * result.rate.rate_hz,
        });
    }
    warnings
}

pub(super) fn warnings(result: &CheckResult, held: f64) -> Vec<Warning> {
    let mut warnings = Vec::new();
    let RateFacts {
        factor,
        convergence,
        ..
    } = result.rate;
    if convergence.moved_db.is_nan() || convergence.moved_db > CONVERGED_DB {
        warnings.push(Warning::NotConverged {
            moved_db: convergence.moved_db,
            factor,
        });
    }
    if factor == MAX_FACTOR {
        warnings.push(Warning::RateLimited { factor });
    }
    let highest = result.signal.peak * result.study.signal.level;
    if highest > 1.0 {
        warnings.push(Warning::AboveFullScale {
            peak: result.signal.peak,
        });
    }
    if held > 0.0 {
        warnings.push(Warning::HeldAtEdge { fraction: held });
    }
    if let (Scheme::Width(scheme), Some(turn)) = (result.scheme(), result.map.turns_at())
        && scheme.law != WidthLaw::Sine
    {
        warnings.push(Warning::WidthTurns { width: turn });
    }
    if result.map.control() == Control::Angle {
        let reach = AngleReach::of(result.map.known());
        if reach.lowest > FILLED_NOTCH || reach.full_rad > 0.0 {
            warnings.push(Warning::AngleReach {
                full_deg: reach.full_rad.to_degrees(),
                lowest_db: crate::units::db(reach.lowest * reach.lowest),
            });
        }
    }
    if let Some(coarse) = coarse_grid(result) {
        warnings.push(coarse);
    }
    warnings.extend(of_scheme(result));
    if let Some(first) = result.map.failures().first() {
        warnings.push(Warning::PointsFailed {
            count: result.map.failures().len(),
            reason: first.reason.clone(),
        });
    }
    if let Some(stage) = &result.stage {
        // A silicon junction starts to conduct at about 0.7 V (common practice).
        let modelled = match &result.study.hardware {
            Hardware::Stage(stage) => stage.switch.diode.is_some(),
            Hardware::Map(_) => true,
        };
        // Joined and paired switches go beyond their rails away from full output.
        let lowest_v = match &result.study.hardware {
            Hardware::Stage(hardware)
                if hardware.is_pair() || result.map.control() == Control::Angle =>
            {
                result
                    .map
                    .points()
                    .iter()
                    .filter_map(|point| point.switch_min_v)
                    .fold(stage.orbit.switch_min_v, f64::min)
            }
            _ => stage.orbit.switch_min_v,
        };
        if !modelled && lowest_v < -0.7 {
            warnings.push(match stage.orbit.switches.is_empty() {
                true => Warning::DiodeWouldConduct { lowest_v },
                false => Warning::BeyondRails { lowest_v },
            });
        }
        let signal_s = 1.0 / result.signal.rate_hz;
        if result.replay.is_none() && stage.settling_s > SLOW * signal_s {
            warnings.push(Warning::SlowStage {
                settling_s: stage.settling_s,
                signal_s,
            });
        }
    }
    if result.map.origin() == Origin::File {
        let mut missing = vec!["stress of the switch", "memory of the stage"];
        if result.metrics.efficiency.is_none() {
            missing.push("efficiency");
        }
        warnings.push(Warning::MapFromFile { missing });
    }
    if result.output_spectrum.segments < FEW_SEGMENTS {
        warnings.push(Warning::FewAverages {
            segments: result.output_spectrum.segments,
        });
    }
    warnings.extend(
        result
            .judgement
            .warnings
            .iter()
            .cloned()
            .map(Warning::Limits),
    );
    warnings
}
