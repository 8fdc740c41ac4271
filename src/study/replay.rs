//! A study whose stage is replayed, and how far its map is from that.

use super::advice::{gate_warnings, warnings};
use super::check::{Bench, FAR_WITHIN_DB, Front};
use super::error::StudyError;
use super::hardware::stage_of;
use super::numbers::metrics;
use super::parting::Parting;
use super::result::{CheckResult, Metrics, RateFacts};
use super::run::Replayed;
use super::warning::Warning;
use crate::metrics::Spectrum;
use crate::orbit::Network;
use crate::signal::Source;
use crate::stage::Feed;
use crate::transmit::ReplayError;
use crate::verdict::{Judgement, Outcome};

/// A margin that moves by no more than this between map and replay leaves the map trusted, dB: half the error that a
/// good power measurement has (common practice).
const TRUSTED_DB: f64 = 0.5;

/// The part of the work that the map takes.
const MAP_PART: f64 = 0.1;

/// What the output is taken from.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum By {
    /// The stage settles at once to the orbit of its controls.
    Map,
    /// The stage is integrated cycle by cycle.
    Replay,
    /// Both, side by side; the verdict is the replay's.
    Both,
}

/// What the map says of the same study.
#[derive(Debug, Clone)]
pub struct ByMap {
    /// The numbers.
    pub metrics: Metrics,
    /// Against the limits.
    pub judgement: Judgement,
    /// Mean spectrum of the output.
    pub output_spectrum: Spectrum,
}

/// One check's margin in both.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct MarginPair {
    /// Of the check.
    pub name: String,
    /// By map, dB.
    pub map_db: Option<f64>,
    /// By replay, dB.
    pub replay_db: Option<f64>,
}

impl MarginPair {
    /// How far the two are apart, dB; margins far within in both do not count.
    pub fn moved_db(&self) -> f64 {
        match (self.map_db, self.replay_db) {
            (Some(a), Some(b)) if a.min(b) > FAR_WITHIN_DB => 0.0,
            (Some(a), Some(b)) => (a - b).abs(),
            (None, None) => 0.0,
            _ => f64::INFINITY,
        }
    }
}

/// The replay behind a result, against the map.
#[derive(Debug, Clone)]
pub struct ReplayFacts {
    /// What was asked for.
    pub by: By,
    /// Carrier cycles replayed, of all branches.
    pub cycles: u64,
    /// Mean square of the difference over the map's output in all of the sampled band, one gain and delay taken off, dB.
    pub nmse_db: f64,
    /// Delay of the replay's output behind the map's, s.
    pub delay_s: f64,
    /// Magnitude of the replay's output over the map's, dB.
    pub gain_db: f64,
    /// Every check's margin in both.
    pub margins: Vec<MarginPair>,
    /// Where the spectra part.
    pub parting: Parting,
    /// What the map says.
    pub map: ByMap,
}

impl ReplayFacts {
    /// The check whose margin moved most.
    pub fn most_moved(&self) -> Option<&MarginPair> {
        let pairs = self.margins.iter();
        pairs.max_by(|a, b| a.moved_db().total_cmp(&b.moved_db()))
    }

    /// Largest movement of any margin, dB.
    pub fn moved_db(&self) -> f64 {
        self.most_moved().map_or(0.0, MarginPair::moved_db)
    }

    /// Whether the map would have done for this study: the same verdict, and no margin moved by more than 0.5 dB.
    pub fn map_holds(&self, outcome: Outcome) -> bool {
        self.map.judgement.verdict.outcome == outcome && self.moved_db() <= TRUSTED_DB
    }

    /// The same in words.
    pub fn statement(&self, outcome: Outcome) -> String {
        let moved = self.moved_db();
        let margins = if moved.is_finite() {
            format!("margins differ by {moved:.2} dB at most")
        } else {
            "a check is decided in only one of the two".to_owned()
        };
        match self.map_holds(outcome) {
            true => format!("{margins}: the map holds for this study"),
            false => format!("{margins}: the map does not hold for this study"),
        }
    }
}

/// The study of `bench` by map at the factor of oversampling that it needs, then replayed at the same.
pub(super) fn replayed(
    bench: &Bench<'_>,
    front: &Front,
    source: &mut dyn Source,
    by: By,
    workers: usize,
    progress: &mut dyn FnMut(f64),
) -> Result<CheckResult, StudyError> {
    let study = bench.study;
    let stage = stage_of(study).ok_or(StudyError::NoStage)?;
    let network = Network::new(&stage)?;
    if stage.is_curved() {
        return Err(ReplayError::Curved.into());
    }
    let by_map = bench.check(front.clone(), source, &mut |part| progress(MAP_PART * part))?;
    let correction = front.correction();
    let mut chain = bench.chain(front, correction.as_ref());
    chain.factor = by_map.rate.factor;
    chain.replay = Some(Replayed {
        network: &network,
        workers,
    });
    // Two passes; the second is quick where the first one's output was kept.
    let instants = 2.0 * bench.signal.samples as f64 * chain.factor as f64;
    let mut done = 0.0;
    let run = chain.run(source, &mut |count| {
        done += count as f64 / instants;
        progress((MAP_PART + (1.0 - MAP_PART) * done).min(1.0));
    })?;
    let judgement = bench.verdict_of(&run);
    let metrics = metrics(study, &run, &judgement)?;
    let against = run.against_map.ok_or(StudyError::NoStage)?;
    let facts = ReplayFacts {
        by,
        cycles: against.cycles,
        nmse_db: against.errors.nmse_db,
        delay_s: against.alignment.delay_s,
        gain_db: crate::units::db(against.alignment.gain.norm_sqr()),
        margins: margins(&by_map.judgement, &judgement),
        parting: Parting::of(&by_map.output_spectrum, &run.output_spectrum),
        map: ByMap {
            metrics: by_map.metrics,
            judgement: by_map.judgement,
            output_spectrum: by_map.output_spectrum,
        },
    };
    let mut result = CheckResult {
        rate: RateFacts {
            samples: run.output_envelope.samples,
            ..by_map.rate
        },
        metrics,
        judgement,
        output_spectrum: run.output_spectrum,
        wanted_spectrum: run.wanted_spectrum,
        peak_spectra: run.peak_spectra,
        output_envelope: run.output_envelope,
        wanted_envelope: run.wanted_envelope,
        control_density: run.control_density,
        symbols: run.symbols,
        notch: run.notch,
        gate: run.gate,
        replay: Some(Box::new(facts)),
        warnings: Vec::new(),
        study: by_map.study,
        signal: by_map.signal,
        map: by_map.map,
        stage: by_map.stage,
        table: by_map.table,
        stress: run.stress,
    };
    result.warnings = warnings(&result, run.held);
    result.warnings.extend(gate_warnings(&result));
    if let Some(facts) = &result.replay {
        let outcome = result.judgement.verdict.outcome;
        if !facts.map_holds(outcome) {
            result.warnings.insert(
                0,
                Warning::MapMisleads {
                    moved_db: facts.moved_db(),
                    check: facts
                        .most_moved()
                        .map_or_else(String::new, |pair| pair.name.clone()),
                    other_verdict: facts.map.judgement.verdict.outcome != outcome,
                },
            );
        }
    }
    if matches!(stage.feed, Feed::Choke { .. }) {
        result.warnings.push(Warning::IdealChoke);
    }
    Ok(result)
}

/// Whether `error` says that a stage or a scheme as such is not replayed, in place of something amiss in the study.
pub(super) fn is_refusal(error: &ReplayError) -> bool {
    matches!(
        error,
        ReplayError::Curved
            | ReplayError::Inputs
            | ReplayError::Scheme { .. }
            | ReplayError::TooLarge { .. }
            | ReplayError::NeverSettles
            | ReplayError::ChokeIntoOpen { .. }
    )
}

fn margins(by_map: &Judgement, replay: &Judgement) -> Vec<MarginPair> {
    let checks = replay.verdict.checks.iter();
    checks
        .map(|check| {
            let own = by_map.verdict.checks.iter();
            let mut own = own.filter(|other| other.name == check.name && other.set == check.set);
            MarginPair {
                name: check.name.clone(),
                map_db: own.next().and_then(|other| other.margin_db),
                replay_db: check.margin_db,
            }
        })
        .collect()
}
