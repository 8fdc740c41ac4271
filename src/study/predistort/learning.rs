//! A polynomial learned on the study's own transmitter and verified through the whole chain.
//!
//! For learning the chain runs at the polynomial's own rate, one instant a sample and without the hold, over
//! as much of the signal as memory allows; the verification is an ordinary check, hold included.

use num_complex::Complex64;

use super::PolynomialResult;
use crate::drive::Track;
use crate::math::delay::{Delay, LATENCY};
use crate::metrics::{Alignment, AlignmentMeter};
use crate::predistort::{CoefficientWords, PolynomialRequest, fewest_bits, learn};
use crate::signal::{Oversampled, Source};
use crate::study::check::{Bench, Front};
use crate::study::error::StudyError;
use crate::transmit::MapTransmitter;

/// Instants that are learned from, at most.
const MOST_INSTANTS: usize = 1 << 18;

/// Samples of the signal's own rate at both ends where its interpolation sees past the file.
const EDGE: usize = 64;

/// The transmitter at the polynomial's rate.
struct Model<'a> {
    bench: &'a Bench<'a>,
    rate_hz: f64,
    /// Output volts for a signal of full scale.
    gain_v: f64,
    /// Found on the first signal and kept: the delay is the hardware's own, and so is the phase.
    alignment: Option<Alignment>,
}

impl Model<'_> {
    /// Output for `signal`, aligned, over the wanted gain.
    fn transmit(&mut self, signal: &[Complex64]) -> Result<Vec<Complex64>, StudyError> {
        let study = self.bench.study;
        let scheme = &study.scheme;
        let mut drive = scheme.drive(
            &self.bench.map,
            study.hardware.anchor(),
            study.signal.level,
            study.full_control(),
            self.rate_hz,
        );
        let mut transmitter =
            MapTransmitter::new(&self.bench.map, &scheme.modulator(), self.rate_hz);
        let reach = scheme.settling(self.rate_hz);
        // Zeros behind the end push the last samples out.
        let mut padded = signal.to_vec();
        padded.resize(signal.len() + 2 * reach + 2 * LATENCY, Complex64::ZERO);
        let (mut track, mut output) = (Track::default(), Vec::with_capacity(padded.len()));
        drive.push(&padded, &mut track);
        transmitter.push(&track, 0..track.len(), &mut output);
        let alignment = match self.alignment {
            Some(alignment) => alignment,
            None => {
                let longest_s = reach as f64 / self.rate_hz;
                let mut meter = AlignmentMeter::new(self.rate_hz, longest_s)?;
                meter.push(signal, &output[..signal.len()])?;
                *self.alignment.insert(meter.finish()?)
            }
        };
        let samples = (alignment.delay_s * self.rate_hz).max(0.0);
        let mut rest = Delay::new(samples.ceil() - samples);
        let skip = samples.ceil() as usize + LATENCY;
        let gain = alignment.gain / alignment.gain.norm() * self.gain_v;
        output.resize(signal.len() + skip, Complex64::ZERO);
        let aligned = output.iter().map(|&sample| rest.push(sample) / gain);
        Ok(aligned.skip(skip).take(signal.len()).collect())
    }
}

pub(super) fn learn_and_check(
    bench: &Bench<'_>,
    request: &PolynomialRequest,
    source: &mut dyn Source,
    progress: &mut dyn FnMut(f64),
) -> Result<PolynomialResult, StudyError> {
    source.rewind()?;
    let mut oversampled = Oversampled::new(source, request.rate)?;
    let rate_hz = oversampled.rate_hz();
    let mut wanted = vec![Complex64::ZERO; MOST_INSTANTS];
    let count = oversampled.read(&mut wanted)?;
    wanted.truncate(count);
    drop(oversampled);
    let mut model = Model {
        bench,
        rate_hz,
        // The highest output at full range: what the table aims at, too.
        gain_v: bench.map.full_amplitude_v() * bench.study.signal.level,
        alignment: None,
    };
    let edge = bench.study.scheme.settling(rate_hz) + EDGE * request.rate;
    let mut learned = learn(request, edge, &wanted, |signal| model.transmit(signal))?;
    // What is verified and written is what the words hold.
    let mut words = None;
    if let Some(fit) = &mut learned.fit {
        let left_db = learned
            .passes
            .iter()
            .map(|pass| pass.output_nmse_db)
            .fold(0.0, f64::min);
        let some = &wanted[..wanted.len().min(1 << 14)];
        let bits = request
            .coefficient_bits
            .unwrap_or_else(|| fewest_bits(&fit.polynomial, some, left_db));
        let held = CoefficientWords::for_all(bits, &fit.polynomial.coefficients);
        fit.polynomial = held.rounded(&fit.polynomial);
        words = Some(held);
    }
    progress(0.5);
    let after = match &learned.fit {
        None => None,
        Some(fit) => {
            let front = Front::Polynomial(fit.polynomial.clone());
            Some(bench.check(front, source, &mut |part| progress(0.5 + 0.5 * part))?)
        }
    };
    Ok(PolynomialResult {
        learned,
        words,
        after,
        instants: wanted.len(),
    })
}
