//! Predistortion in front of a scheme: a table or a polynomial on its own clock, held in between.

use num_complex::Complex64;

use super::lookup::Lookup;
use super::phase::magnitude;
use super::polynomial::{Polynomial, PolynomialStream};
use super::rate::MAX_FACTOR;

/// What stands in front of the scheme.
#[derive(Debug, Clone, PartialEq)]
pub enum Correction {
    /// Magnitude to control and phase; the scheme's own shaping is in the table.
    Table(Lookup),
    /// The same without a clock of its own: at every instant.
    Instant(Lookup),
    /// Signal to signal; the scheme follows as it is.
    Polynomial(Polynomial),
}

impl Correction {
    /// How often it is applied, in times the signal's rate.
    pub fn rate(&self) -> usize {
        match self {
            Self::Table(lookup) => lookup.rate(),
            Self::Instant(_) => MAX_FACTOR,
            Self::Polynomial(polynomial) => polynomial.rate,
        }
    }

    /// Samples of its own clock over which one output reaches, the hold included.
    pub fn span(&self) -> usize {
        match self {
            Self::Table(_) | Self::Instant(_) => 1,
            Self::Polynomial(polynomial) => polynomial.memory() + 1,
        }
    }
}

/// A correction on one of the scheme's two paths. Each path samples the signal it carries, its dead time already
/// behind it: the front end delays before it corrects.
#[derive(Debug, Clone)]
pub(super) struct Corrector {
    /// Instants from one sample of the correction to the next.
    every: usize,
    clock: usize,
    work: Work,
    held: Corrected,
}

#[derive(Debug, Clone)]
enum Work {
    Table(Lookup),
    Polynomial(PolynomialStream),
}

/// What a correction makes of a sample.
#[derive(Debug, Clone, Copy)]
pub(super) enum Corrected {
    /// The control as a fraction of its range, and the signal with its phase corrected.
    Direct { control: f64, signal: Complex64 },
    /// Another signal for the scheme.
    Signal(Complex64),
}

impl Corrector {
    /// `correction` for a stream of `factor` times the signal's rate.
    pub(super) fn new(correction: &Correction, factor: usize) -> Self {
        Self {
            every: (factor / correction.rate()).max(1),
            clock: 0,
            work: match correction {
                Correction::Table(lookup) | Correction::Instant(lookup) => {
                    Work::Table(lookup.clone())
                }
                Correction::Polynomial(polynomial) => {
                    Work::Polynomial(PolynomialStream::new(polynomial))
                }
            },
            held: Corrected::Signal(Complex64::ZERO),
        }
    }

    /// The next instant; `level` is the signal's full scale as a fraction of the control's range.
    pub(super) fn push(&mut self, sample: Complex64, level: f64) -> Corrected {
        if self.clock == 0 {
            self.held = match &mut self.work {
                Work::Table(lookup) => {
                    let word = lookup.word(level * sample.norm_sqr().sqrt());
                    Corrected::Direct {
                        control: lookup.control(word),
                        signal: sample * lookup.phasor(word),
                    }
                }
                Work::Polynomial(stream) => Corrected::Signal(stream.push(sample)),
            };
        }
        self.clock = (self.clock + 1) % self.every;
        self.held
    }
}

/// The correction on both paths of a scheme with a law of its own: the table hands on the magnitude that the law is given.
#[derive(Debug, Clone)]
pub(super) struct Correctors([Corrector; 2]);

impl Correctors {
    /// `correction` for streams of `factor` times the signal's rate.
    pub(super) fn new(correction: &Correction, factor: usize) -> Self {
        let corrector = Corrector::new(correction, factor);
        Self([corrector.clone(), corrector])
    }

    /// The magnitude for the law, a part of full output, and the signal whose phase goes to the drive.
    pub(super) fn push(
        &mut self,
        for_magnitude: Complex64,
        for_angle: Complex64,
        level: f64,
    ) -> (f64, Complex64) {
        let [first, second] = &mut self.0;
        let part = one(first, for_magnitude, level).0;
        (part, one(second, for_angle, level).1)
    }

    /// The same for two streams that each need both.
    pub(super) fn push_branches(
        &mut self,
        samples: [Complex64; 2],
        level: f64,
    ) -> [(f64, Complex64); 2] {
        let [first, second] = &mut self.0;
        [
            one(first, samples[0], level),
            one(second, samples[1], level),
        ]
    }
}

fn one(corrector: &mut Corrector, sample: Complex64, level: f64) -> (f64, Complex64) {
    match corrector.push(sample, level) {
        Corrected::Direct { control, signal } => (control, signal),
        Corrected::Signal(signal) => (level * magnitude(signal), signal),
    }
}
