//! All schemes behind one face: what they are called, what they move, how they work at a sample rate.

use num_complex::Complex64;

use super::burst::{BurstDrive, BurstScheme, GateFigures};
use super::class_b::{ClassBDrive, ClassBScheme};
use super::levels::{LevelsDrive, LevelsScheme};
use super::outphase::{Combining, OutphaseDrive, OutphaseScheme};
use super::rate::RateReason;
use super::supply::{SupplyDrive, SupplyScheme};
use super::width::{WidthDrive, WidthLaw, WidthScheme};
use super::{Correction, Modulator, Track};
use crate::input::{Files, Problem, Section};
use crate::map::{Control, Map};
use crate::stage::Anchor;

/// How the signal moves the stage's controls.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Scheme {
    /// Magnitude to the supply, phase to the drive.
    Supply(SupplyScheme),
    /// Magnitude to the width of the pulses.
    Width(WidthScheme),
    /// Magnitude to a few rails and the width.
    Levels(LevelsScheme),
    /// Magnitude to a train of pulses that gates the stage.
    Burst(BurstScheme),
    /// Magnitude to the angle between two stages.
    Outphase(OutphaseScheme),
    /// An ideal linear stage, for comparison.
    ClassB(ClassBScheme),
}

impl Scheme {
    /// The same with the files read that it names; `section` is the table that it came from.
    ///
    /// # Errors
    /// The first thing wrong in any of them.
    pub fn loaded(self, section: &Section<'_>, files: &dyn Files) -> Result<Self, Problem> {
        match self {
            Self::Burst(mut burst) => {
                if let Some(pulses) = &burst.pulses {
                    burst.pulses = Some(pulses.load(files, section, burst.grid_s)?);
                }
                Ok(Self::Burst(burst))
            }
            other => Ok(other),
        }
    }

    /// Its name in studies.
    pub fn name(&self) -> &'static str {
        match self {
            Self::Supply(_) => "supply",
            Self::Width(_) => "width",
            Self::Levels(_) => "levels",
            Self::Burst(_) => "burst",
            Self::Outphase(_) => "outphase",
            Self::ClassB(_) => "class_b",
        }
    }

    /// The control of the map that it runs on.
    pub fn control(&self) -> Control {
        match self {
            Self::Supply(_) => Control::Supply,
            Self::Width(_) | Self::Levels(_) | Self::Burst(_) => Control::Width,
            Self::Outphase(scheme) if matches!(scheme.combining, Combining::Joined(_)) => {
                Control::Angle
            }
            Self::Outphase(_) | Self::ClassB(_) => Control::Drive,
        }
    }

    /// What makes the supply, for the power drawn.
    pub fn modulator(&self) -> Modulator {
        match self {
            Self::Supply(scheme) => scheme.modulator.clone(),
            Self::Levels(scheme) => Modulator {
                efficiency: scheme.efficiency,
                idle_w: scheme.idle_w,
                ..Modulator::default()
            },
            Self::Width(_) | Self::Burst(_) | Self::Outphase(_) | Self::ClassB(_) => {
                Modulator::default()
            }
        }
    }

    /// What static predistortion from the inverse of the map means for it.
    pub fn inversion(&self) -> Inversion {
        let other = |law: WidthLaw| match law {
            WidthLaw::Inverse => WidthLaw::Sine,
            WidthLaw::Amplitude | WidthLaw::Sine => WidthLaw::Inverse,
        };
        let pair = |law: WidthLaw, own: Self, changed: Self| match law {
            WidthLaw::Inverse => Inversion::Law {
                without: Box::new(changed),
                with: Box::new(own),
            },
            WidthLaw::Amplitude | WidthLaw::Sine => Inversion::Law {
                without: Box::new(own),
                with: Box::new(changed),
            },
        };
        match self {
            Self::Supply(_) => Inversion::Table,
            Self::Width(scheme) => {
                let mut changed = *scheme;
                changed.law = other(scheme.law);
                pair(scheme.law, self.clone(), Self::Width(changed))
            }
            Self::Levels(scheme) => {
                let mut changed = scheme.clone();
                changed.law = other(scheme.law);
                pair(scheme.law, self.clone(), Self::Levels(changed))
            }
            Self::Burst(_) | Self::Outphase(_) | Self::ClassB(_) => Inversion::Straight,
        }
    }

    /// The part of the control's range that it never goes below.
    pub fn floor(&self) -> f64 {
        match self {
            Self::Supply(scheme) => scheme.shaping.floor,
            _ => 0.0,
        }
    }

    /// The seed of its random parts, where it has any.
    pub fn seed(&self) -> Option<u64> {
        match self {
            Self::Width(scheme) if scheme.jitter_s > 0.0 => Some(scheme.seed),
            _ => None,
        }
    }

    /// The anchor of the pulses where the scheme chooses another than the stage's.
    pub fn anchor(&self) -> Option<Anchor> {
        match self {
            Self::Width(scheme) => scheme.anchor,
            _ => None,
        }
    }

    /// Instants until the track shows nothing of the start.
    pub fn settling(&self, rate_hz: f64) -> usize {
        match self {
            Self::Supply(scheme) => SupplyDrive::settling(scheme, rate_hz),
            Self::Width(scheme) => scheme.settling(rate_hz),
            Self::Levels(scheme) => scheme.settling(rate_hz),
            Self::Burst(scheme) => scheme.settling(rate_hz),
            Self::Outphase(scheme) => scheme.settling(rate_hz),
            Self::ClassB(_) => ClassBDrive::settling(),
        }
    }

    /// The sample rates that it asks for, and why.
    pub(super) fn rates(&self, signal_rate_hz: f64) -> Vec<(f64, RateReason)> {
        match self {
            Self::Supply(scheme) => scheme.rates(signal_rate_hz),
            Self::Width(scheme) => scheme.rates(signal_rate_hz),
            Self::Levels(scheme) => scheme.rates(signal_rate_hz),
            Self::Burst(scheme) => scheme.rates(signal_rate_hz),
            Self::Outphase(scheme) => scheme.rates(signal_rate_hz),
            Self::ClassB(_) => Vec::new(),
        }
    }

    /// The scheme at work at `rate_hz` on `map`, whose control's full range is `full`; `anchor` is the stage's own.
    /// Signal full scale is at `level` of the range: of the supply for `supply`, of the output for all others.
    pub fn drive<'a>(
        &self,
        map: &'a Map,
        anchor: Anchor,
        level: f64,
        full: f64,
        rate_hz: f64,
    ) -> SchemeDrive<'a> {
        SchemeDrive(match self {
            Self::Supply(scheme) => {
                let drive = SupplyDrive::new(scheme, level, full, rate_hz).loaded(scheme, map);
                Kind::Supply(Box::new(drive))
            }
            Self::Width(scheme) => {
                let drive = WidthDrive::new(scheme, map, anchor, level, rate_hz);
                Kind::Width(Box::new(drive))
            }
            Self::Levels(scheme) => {
                Kind::Levels(Box::new(LevelsDrive::new(scheme, map, level, rate_hz)))
            }
            Self::Burst(scheme) => {
                Kind::Burst(Box::new(BurstDrive::new(scheme, map, level, rate_hz)))
            }
            Self::Outphase(scheme) => {
                Kind::Outphase(Box::new(OutphaseDrive::new(scheme, map, level, rate_hz)))
            }
            Self::ClassB(_) => Kind::ClassB(Box::new(ClassBDrive::new(level))),
        })
    }
}

/// What static predistortion from the inverse of the map means for a scheme.
#[derive(Debug, Clone, PartialEq)]
pub enum Inversion {
    /// A table in front of it.
    Table,
    /// The law of its widths: one that knows nothing of the stage, or the inverse of its map.
    Law {
        /// The sine law of rectangular pulses, or the user's own law.
        without: Box<Scheme>,
        /// The inverse of the map, phase included.
        with: Box<Scheme>,
    },
    /// Its map is straight: nothing to undo.
    Straight,
}

/// A scheme at work at one sample rate.
#[derive(Debug, Clone)]
pub struct SchemeDrive<'a>(Kind<'a>);

#[derive(Debug, Clone)]
enum Kind<'a> {
    Supply(Box<SupplyDrive>),
    Width(Box<WidthDrive<'a>>),
    Levels(Box<LevelsDrive<'a>>),
    Burst(Box<BurstDrive<'a>>),
    Outphase(Box<OutphaseDrive>),
    ClassB(Box<ClassBDrive>),
}

impl SchemeDrive<'_> {
    /// The same with `correction` in front. Those that take none ([`Scheme::table_place`]) are left as they are; a
    /// study with one of them is refused when it is read.
    #[must_use]
    pub fn corrected(self, correction: &Correction, factor: usize) -> Self {
        match self.0 {
            Kind::Supply(drive) => {
                Self(Kind::Supply(Box::new(drive.corrected(correction, factor))))
            }
            Kind::Width(drive) => Self(Kind::Width(Box::new(drive.corrected(correction, factor)))),
            Kind::Outphase(drive) => Self(Kind::Outphase(Box::new(
                drive.corrected(correction, factor),
            ))),
            other => Self(other),
        }
    }

    /// What the gate has done so far, of a scheme that gates the stage.
    pub fn gate_figures(&self) -> Option<GateFigures> {
        match &self.0 {
            Kind::Burst(drive) => Some(drive.figures()),
            _ => None,
        }
    }

    /// Appends the controls for `samples` to `track`.
    pub fn push(&mut self, samples: &[Complex64], track: &mut Track) {
        match &mut self.0 {
            Kind::Supply(drive) => drive.push(samples, track),
            Kind::Width(drive) => drive.push(samples, track),
            Kind::Levels(drive) => drive.push(samples, track),
            Kind::Burst(drive) => drive.push(samples, track),
            Kind::Outphase(drive) => drive.push(samples, track),
            Kind::ClassB(drive) => drive.push(samples, track),
        }
    }
}
