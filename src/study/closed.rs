//! The next table from a captured pair, and what it is expected to do.
//!
//! ```text
//! lines   robust, through the cloud; the frequency again against them; the lines again
//! cloud   the stage's static output
//! judge   spectra of the capture as it is, and as the next table would leave it:
//!         y' = y - (F(u) exp(jp) - F(u') exp(jp')) x / |x|       memory and noise stay as they are
//! ```

use num_complex::Complex64;

use super::error::StudyError;
use super::measure::{ErrorsRead, MeasureRequest, Meters, Read, facts, is_looped, read};
use super::result::SignalFacts;
use crate::metrics::{
    EnvelopeFigures, PairReader, Reference, Spectrum, Sync, occupied_bandwidth, synchronize,
};
use crate::predistort::{
    Cloud, InForce, LoopEnd, NextRequest, NextTable, Pass, Scout, StaticFit, Table, TableError,
    judge_pass, next_table,
};
use crate::signal::Source;
use crate::verdict::{Judgement, Wanted};

/// A capture sampled less than this many times its signal's occupied bandwidth shows a filtered output.
const FEW_TIMES_BAND: f64 = 4.0;

/// Samples to one phase of the refined frequency.
const REFINED: usize = 1024;

/// Outliers past this part are worth a warning.
const MANY_OUTLIERS: f64 = 0.02;

/// A correlation below this is worth a warning.
const WEAK: f64 = 0.7;

/// What is wanted of a captured pair.
#[derive(Debug, Clone)]
pub struct ClosedRequest {
    /// The capture, what it is held against, and how it is read.
    pub measure: MeasureRequest,
    /// The wanted signal's full scale, a part of the control's range.
    pub level: f64,
    /// The table in force, as the user named it.
    pub previous: Option<String>,
    /// How the next table is made.
    pub next: NextRequest,
}

/// A captured pair, the table made of it, and what it is expected to do.
#[derive(Debug, Clone)]
pub struct ClosedResult {
    /// What was asked.
    pub request: ClosedRequest,
    /// The capture as it was found.
    pub signal: SignalFacts,
    /// The wanted signal as it was found.
    pub reference: SignalFacts,
    /// How they lie against each other.
    pub sync: Sync,
    /// What the stage does.
    pub fit: StaticFit,
    /// The next table, with all passes so far.
    pub next: NextTable,
    /// Whether a further table helps.
    pub end: LoopEnd,
    /// The capture.
    pub before: ClosedSide,
    /// The same with the next table's static output put in the place of the present one's.
    pub expected: ClosedSide,
    /// The wanted signal's occupied bandwidth, Hz.
    pub occupied_hz: f64,
    /// The wanted signal at the capture's gain.
    pub wanted_spectrum: Spectrum,
    /// What limits how far this can be trusted.
    pub warnings: Vec<String>,
}

/// One reading of the output.
#[derive(Debug, Clone)]
pub struct ClosedSide {
    /// Mean square that one gain leaves, over the output's, dB.
    pub linear_rest_db: f64,
    /// The numbers against the limits.
    pub judgement: Judgement,
    /// Mean spectrum.
    pub spectrum: Spectrum,
    /// Powers.
    pub envelope: EnvelopeFigures,
}

/// One pass over both streams.
fn pass(
    capture: &mut dyn Source,
    reference: &mut Reference<'_>,
    sync: &Sync,
    mut take: impl FnMut(&[Complex64], &[Complex64]) -> Result<(), StudyError>,
) -> Result<(), StudyError> {
    let mut reader = PairReader::of(capture, reference, sync)?;
    let (mut x, mut y) = (Vec::new(), Vec::new());
    while reader.read(&mut x, &mut y)? > 0 {
        take(&x, &y)?;
    }
    Ok(())
}

/// Sums for what one gain leaves.
#[derive(Debug, Clone, Copy, Default)]
struct Linear {
    xx: f64,
    yy: f64,
    xy: Complex64,
}

impl Linear {
    fn push(&mut self, x: Complex64, y: Complex64) {
        self.xx += x.norm_sqr();
        self.yy += y.norm_sqr();
        self.xy += x.conj() * y;
    }

    fn rest_db(&self) -> f64 {
        let rest = (self.yy - self.xy.norm_sqr() / self.xx) / self.yy;
        crate::units::db(rest.max(f64::MIN_POSITIVE))
    }

    fn evm_percent(&self) -> f64 {
        let gained = self.xy.norm_sqr() / self.xx;
        100.0 * ((self.yy - gained).max(0.0) / gained).sqrt()
    }
}

/// Makes the next table from `capture`, taken while `previous` was in force (none: the magnitude itself was the
/// control), and the wanted signal `reference`.
///
/// `progress` is told now and then which part of the work is done, 0 to 1.
///
/// # Errors
/// [`StudyError`].
pub fn next_from_capture(
    request: &ClosedRequest,
    previous: Option<&Table>,
    capture: &mut dyn Source,
    reference: &mut dyn Source,
    progress: &mut dyn FnMut(f64),
) -> Result<ClosedResult, StudyError> {
    let measure = &request.measure;
    if let Some(previous) = previous
        && (previous.full_control / request.next.full_control - 1.0).abs() > 1e-9
    {
        return Err(StudyError::OtherRange {
            table_v: previous.full_control,
            given_v: request.next.full_control,
        });
    }
    let signal = facts(&measure.file, capture)?;
    let sent = facts(
        measure.reference.as_deref().unwrap_or("reference"),
        reference,
    )?;
    progress(0.1);
    let sync = synchronize(capture, reference, measure.repeat)?;
    progress(0.4);
    let looped = is_looped(measure.repeat, &sent, &signal);
    let mut again = Reference::again(reference, sent.samples, looped, signal.rate_hz);
    let in_force = match previous {
        None => InForce::Plain(request.next.shaping),
        Some(table) => InForce::Table(&table.lookup),
    };
    let mut scout = Scout::new(1.05 * sent.peak, sync.gain);
    pass(capture, &mut again, &sync, |x, y| {
        scout.push(x, y);
        Ok(())
    })?;
    progress(0.55);
    let mut lines = scout.finish();
    // The frequency against the static output, then the lines without what it had turned.
    let mut blocks = Vec::new();
    let mut at = sync.from as f64;
    pass(capture, &mut again, &sync, |x, y| {
        for (x, y) in x.chunks(REFINED).zip(y.chunks(REFINED)) {
            let sum = x
                .iter()
                .zip(y)
                .filter_map(|(&x, y)| Some(y * lines.predicted(x)?.conj()))
                .sum::<Complex64>();
            blocks.push((at + 0.5 * x.len() as f64, sum / sync.gain));
            at += x.len() as f64;
        }
        Ok(())
    })?;
    let sync = sync.refined(&blocks, signal.rate_hz);
    let mut scout = Scout::new(1.05 * sent.peak, sync.gain);
    pass(capture, &mut again, &sync, |x, y| {
        scout.push(x, y);
        Ok(())
    })?;
    lines = scout.finish();
    let mut cloud = Cloud::new(&lines, in_force, request.level);
    pass(capture, &mut again, &sync, |x, y| {
        cloud.push(x, y);
        Ok(())
    })?;
    progress(0.7);
    let fit = cloud
        .finish()
        .ok_or(StudyError::Table(TableError::NothingSeen))?;
    let mut next = next_table(&fit, in_force, &request.next)?;
    let before_this = previous.map_or(&[][..], |table| &table.passes);
    let end = judge_pass(&fit, next.rounding_db, before_this);
    next.table.passes = before_this.to_vec();
    next.table.passes.push(Pass {
        linear_rest_db: fit.linear_rest_db,
        static_rest_db: fit.static_rest_db,
    });

    let wanted = Wanted::of(&measure.limits);
    let count = sync.to - sync.from;
    let meters = |wanted: &Wanted| Meters::new(measure, wanted, signal.rate_hz, count);
    let (mut now, mut then) = (meters(&wanted)?, meters(&wanted)?);
    let mut ideal = meters(&Wanted::default())?;
    let mut linear = [Linear::default(); 2];
    let mut changed = Vec::new();
    pass(capture, &mut again, &sync, |x, y| {
        changed.clear();
        changed.extend(x.iter().zip(y).map(|(&x, &y)| {
            let magnitude = x.norm();
            let moved = if magnitude > 0.0 {
                let change = change(&next, in_force, request.level * magnitude);
                sync.gain * change * x / magnitude
            } else {
                Complex64::ZERO
            };
            linear[0].push(x, y);
            linear[1].push(x, y + moved);
            y + moved
        }));
        now.push(y);
        then.push(&changed);
        ideal.push(x);
        Ok(())
    })?;
    progress(0.95);
    let side = |meters, linear: &Linear| -> Result<ClosedSide, StudyError> {
        let errors = ErrorsRead {
            evm_percent: Some(linear.evm_percent()),
            ..ErrorsRead::default()
        };
        let Read {
            judgement,
            spectrum,
            envelope,
            ..
        } = read(meters, measure, errors)?;
        Ok(ClosedSide {
            linear_rest_db: linear.rest_db(),
            judgement,
            spectrum,
            envelope,
        })
    };
    let before = side(now, &linear[0])?;
    let expected = side(then, &linear[1])?;
    let mut wanted_spectrum = ideal.fine.finish()?;
    let occupied_hz = occupied_bandwidth(&wanted_spectrum, 0.99)?.width_hz();
    let factor = measure.scale.watts_a_unit().unwrap_or(1.0);
    super::measure::scale(&mut wanted_spectrum, factor * sync.gain.norm_sqr());
    progress(1.0);
    Ok(ClosedResult {
        warnings: warnings(&signal, &sent, &sync, &fit, &next, occupied_hz),
        request: request.clone(),
        signal,
        reference: sent,
        sync,
        fit,
        next,
        end,
        before,
        expected,
        occupied_hz,
        wanted_spectrum,
    })
}

/// What the next table changes in the output turned back by the wanted phase, over the gain.
fn change(next: &NextTable, in_force: InForce<'_>, magnitude: f64) -> Complex64 {
    let through =
        |(control, phase_rad): (f64, f64)| next.stage.output(control) * Complex64::cis(phase_rad);
    through(InForce::Table(&next.table.lookup).at(magnitude)) - through(in_force.at(magnitude))
}

fn warnings(
    signal: &SignalFacts,
    sent: &SignalFacts,
    sync: &Sync,
    fit: &StaticFit,
    next: &NextTable,
    occupied_hz: f64,
) -> Vec<String> {
    let mut warnings = Vec::new();
    if sync.correlation < WEAK {
        warnings.push(format!(
            "the capture follows the wanted signal weakly, with a correlation of {:.2}: noise, or another signal",
            sync.correlation
        ));
    }
    if signal.rate_hz < FEW_TIMES_BAND * occupied_hz {
        warnings.push(format!(
            "the capture is sampled at {:.1} times the signal's occupied bandwidth: what the stage spreads past it is cut off, and the map read from it is that of a filtered output. Capture at {FEW_TIMES_BAND} times at least",
            signal.rate_hz / occupied_hz
        ));
    }
    if signal.peak >= 0.9999 && signal.peak <= 1.0 {
        warnings.push("the capture reaches full scale: its receiver may have clipped".to_owned());
    }
    if fit.left_out > MANY_OUTLIERS {
        warnings.push(format!(
            "{:.1} % of the samples lie farther than four spreads from the static map and were left out: bursts of interference, or memory that comes in steps",
            100.0 * fit.left_out
        ));
    }
    if fit.level * sent.peak > 1.0 + 1e-9 {
        warnings.push(format!(
            "the wanted signal's peak is {:.3} of the control's range: what is above 1 is held there",
            fit.level * sent.peak
        ));
    }
    let (low, high) = next.stage.seen;
    if high < 0.9 || low > 0.1 {
        warnings.push(format!(
            "only magnitudes from {low:.3} to {high:.3} of the range were seen: elsewhere the table continues the one before it"
        ));
    }
    warnings
}
