//! The `[scheme]` table of a study.

use super::read_modulator::modulator;
use super::{
    AngleLaw, BandFilter, BandShape, BurstScheme, ClassBScheme, Combining, JoinedScheme,
    LevelsScheme, MovedEdges, OutphaseScheme, PhasePath, Rails, Sampling, Scheme, Shape, Shaping,
    StopBand, SupplyScheme, Updates, WidthLaw, WidthScheme,
};
use crate::input::{Problem, Range, Section};
use crate::math::lowpass::MAX_ORDER;
use crate::math::modal::MAX_POLES;
use crate::orbit::{Compensation, Joint, JointKind};
use crate::stage::Anchor;
use crate::units::Dimension;

impl Scheme {
    /// Reads the `[scheme]` table.
    ///
    /// # Errors
    /// The first thing wrong, with its place.
    pub fn read(section: &Section<'_>) -> Result<Self, Problem> {
        let kinds = [
            ("supply", Kind::Supply),
            ("width", Kind::Width),
            ("levels", Kind::Levels),
            ("burst", Kind::Burst),
            ("outphase", Kind::Outphase),
            ("class_b", Kind::ClassB),
        ];
        let Some(kind) = section.maybe_choice("kind", &kinds)? else {
            return Err(section.problem(
                "kind",
                "\"supply\", \"width\", \"levels\", \"burst\", \"outphase\" or \"class_b\"",
            ));
        };
        let scheme = match kind {
            Kind::Supply => Self::Supply(supply(section)?),
            Kind::Width => Self::Width(width(section)?),
            Kind::Levels => Self::Levels(levels(section)?),
            Kind::Burst => Self::Burst(burst(section)?),
            Kind::Outphase => Self::Outphase(outphase(section)?),
            Kind::ClassB => Self::ClassB(ClassBScheme),
        };
        section.finish()?;
        Ok(scheme)
    }
}

#[derive(Debug, Clone, Copy)]
enum Kind {
    Supply,
    Width,
    Levels,
    Burst,
    Outphase,
    ClassB,
}

const LAWS: [(&str, WidthLaw); 3] = [
    ("inverse", WidthLaw::Inverse),
    ("amplitude", WidthLaw::Amplitude),
    ("sine", WidthLaw::Sine),
];

const ANCHORS: [(&str, Anchor); 3] = [
    ("leading", Anchor::Leading),
    ("centre", Anchor::Centre),
    ("trailing", Anchor::Trailing),
];

fn maybe_phase_path(section: &Section<'_>) -> Result<PhasePath, Problem> {
    let path = section.maybe_section("phase_path")?;
    Ok(path
        .map(|s| phase_path(&s))
        .transpose()?
        .unwrap_or_default())
}

fn width(section: &Section<'_>) -> Result<WidthScheme, Problem> {
    Ok(WidthScheme {
        law: section
            .maybe_choice("law", &LAWS)?
            .unwrap_or(WidthLaw::Inverse),
        anchor: section.maybe_choice("anchor", &ANCHORS)?,
        grid_s: section.maybe_quantity("grid", Dimension::Time, Range::Positive)?,
        shortest_s: section
            .maybe_quantity("shortest", Dimension::Time, Range::NotNegative)?
            .unwrap_or(0.0),
        jitter_s: section
            .maybe_quantity("jitter", Dimension::Time, Range::NotNegative)?
            .unwrap_or(0.0),
        seed: section
            .maybe_whole("seed", 0, u64::from(u32::MAX))?
            .unwrap_or(1),
        delay_s: delay(section)?,
        phase_path: maybe_phase_path(section)?,
    })
}

/// Rails past this number are a converter.
const MOST_RAILS: u64 = 64;

fn levels(section: &Section<'_>) -> Result<LevelsScheme, Problem> {
    let count = section.maybe_whole("count", 1, MOST_RAILS)?;
    let given = [
        count.is_some(),
        section.has("rails"),
        section.has("rail_voltages"),
    ];
    if given.iter().filter(|given| **given).count() != 1 {
        return Err(section.problem(
            "rails",
            "one of: rails (parts of the full supply), rail_voltages, count (equal steps)",
        ));
    }
    let rising = |rails: &[f64]| {
        rails.windows(2).all(|pair| pair[0] < pair[1])
            && (1..=MOST_RAILS as usize).contains(&rails.len())
    };
    let rails = if let Some(count) = count {
        Rails::Parts((1..=count).map(|at| at as f64 / count as f64).collect())
    } else if section.has("rails") {
        let parts = section.quantities("rails", Dimension::Ratio, Range::UpTo(0.0, 1.0))?;
        if !rising(&parts) || parts.last() != Some(&1.0) {
            return Err(section.problem(
                "rails",
                "parts of the full supply, rising, the last one 1 (or count = 3 for equal steps)",
            ));
        }
        Rails::Parts(parts)
    } else {
        let volts = section.quantities("rail_voltages", Dimension::Voltage, Range::Positive)?;
        if !rising(&volts) {
            return Err(section.problem(
                "rail_voltages",
                "up to 64 voltages, rising, the last one the full supply",
            ));
        }
        Rails::Volts(volts)
    };
    Ok(LevelsScheme {
        rails,
        law: section
            .maybe_choice("law", &LAWS)?
            .unwrap_or(WidthLaw::Inverse),
        hysteresis: section
            .maybe_quantity("hysteresis", Dimension::Ratio, Range::Within(0.0, 0.9))?
            .unwrap_or(0.05),
        settling_s: section
            .maybe_quantity("settling", Dimension::Time, Range::Within(0.0, MAX_DELAY_S))?
            .unwrap_or(0.0),
        efficiency: section
            .maybe_quantity("efficiency", Dimension::Ratio, Range::UpTo(0.0, 1.0))?
            .unwrap_or(1.0),
        idle_w: section
            .maybe_quantity("idle", Dimension::Power, Range::NotNegative)?
            .unwrap_or(0.0),
        phase_path: maybe_phase_path(section)?,
    })
}

const ANGLE_LAWS: [(&str, AngleLaw); 3] = [
    ("inverse", AngleLaw::Inverse),
    ("amplitude", AngleLaw::Amplitude),
    ("cosine", AngleLaw::Cosine),
];

/// What joins two stages; the mismatch is told elsewhere.
fn joint(section: &Section<'_>) -> Result<Joint, Problem> {
    let kinds = [("floating", JointKind::Floating), ("tee", JointKind::Tee)];
    let kind = section
        .maybe_choice("joint", &kinds)?
        .unwrap_or(JointKind::Floating);
    let compensation = match section.maybe_section("compensation")? {
        None => None,
        Some(section) => {
            let compensation = Compensation {
                reactance_ohm: section.quantity(
                    "reactance",
                    Dimension::Resistance,
                    Range::Positive,
                )?,
                q: section.maybe_quantity("q", Dimension::Ratio, Range::Positive)?,
                after_rungs: section
                    .maybe_whole("after_rungs", 0, MAX_RUNGS)?
                    .map(|count| count as usize),
            };
            section.finish()?;
            Some(compensation)
        }
    };
    Ok(Joint {
        load_ohm: section.maybe_quantity(
            "joint_resistance",
            Dimension::Resistance,
            Range::Positive,
        )?,
        branch_rungs: section
            .maybe_whole("branch_rungs", 0, MAX_RUNGS)?
            .map(|count| count as usize),
        compensation,
        ..Joint::new(kind)
    })
}

/// More rungs than any ladder that can be solved has.
const MAX_RUNGS: u64 = 1000;

const SAMPLINGS: [(&str, Sampling); 3] = [
    ("natural", Sampling::Natural),
    ("uniform", Sampling::Uniform),
    ("shaped", Sampling::Shaped),
];

const EDGES: [(&str, MovedEdges); 2] = [("one", MovedEdges::One), ("two", MovedEdges::Two)];

const UPDATES: [(&str, Updates); 2] = [("once", Updates::Once), ("twice", Updates::Twice)];

/// Gates past this number of levels are a converter.
const MOST_LEVELS: u64 = 64;

fn burst(section: &Section<'_>) -> Result<BurstScheme, Problem> {
    let pulses = super::burst::read_pulses(section)?;
    let sampling = match (section.maybe_choice("sampling", &SAMPLINGS)?, &pulses) {
        (Some(_), Some(_)) => {
            return Err(section.problem("sampling", "either sampling or pulses from a file"));
        }
        (None, Some(_)) => Sampling::File,
        (sampling, None) => sampling.unwrap_or(Sampling::Natural),
    };
    // What makes no sense beside the sampling is left for `finish` to refuse.
    let ramp = matches!(sampling, Sampling::Natural | Sampling::Uniform);
    let made = sampling != Sampling::File;
    let edges = match ramp {
        true => section.maybe_choice("edges", &EDGES)?,
        false => None,
    };
    let edges = edges.unwrap_or(MovedEdges::Two);
    let updates = match sampling == Sampling::Uniform && edges == MovedEdges::Two {
        true => section.maybe_choice("updates", &UPDATES)?,
        false => None,
    };
    let time = |key| section.maybe_quantity(key, Dimension::Time, Range::Within(0.0, MAX_DELAY_S));
    let transitions_s = match (time("rise")?, time("fall")?) {
        (None, None) => None,
        (Some(rise_s), Some(fall_s)) => Some((rise_s, fall_s)),
        (Some(_), None) => return Err(section.problem("fall", "a time constant, beside rise")),
        (None, Some(_)) => return Err(section.problem("rise", "a time constant, beside fall")),
    };
    let rate_hz = match made {
        true => section.quantity("rate", Dimension::Frequency, Range::Positive)?,
        false => 0.0,
    };
    let grid_s = section.maybe_quantity("grid", Dimension::Time, Range::Positive)?;
    let shortest_s = match made {
        true => time("shortest")?.unwrap_or(0.0),
        false => 0.0,
    };
    // Edges that wait longer would wait for each other.
    for (key, long_s) in [("grid", grid_s.unwrap_or(0.0)), ("shortest", shortest_s)] {
        if long_s * rate_hz > 0.5 {
            return Err(section.problem(key, "at most half of 1 / rate"));
        }
    }
    Ok(BurstScheme {
        sampling,
        rate_hz,
        edges,
        updates: updates.unwrap_or(Updates::Once),
        order: match sampling {
            Sampling::Shaped => section.maybe_whole("order", 1, 2)?.unwrap_or(1) as u32,
            _ => 1,
        },
        levels: match made {
            true => section.maybe_whole("levels", 2, MOST_LEVELS)?.unwrap_or(2) as u32,
            false => 2,
        },
        grid_s,
        shortest_s,
        delay_s: match made {
            true => delay(section)?,
            false => 0.0,
        },
        phase_path: maybe_phase_path(section)?,
        transitions_s,
        filter: section
            .maybe_section("filter")?
            .map(|s| band_filter(&s))
            .transpose()?,
        pulses,
    })
}

fn band_filter(section: &Section<'_>) -> Result<BandFilter, Problem> {
    let chebyshev = section
        .maybe_choice("shape", &[("butterworth", false), ("chebyshev", true)])?
        .unwrap_or(false);
    let filter = BandFilter {
        shape: if chebyshev {
            BandShape::Chebyshev {
                ripple_db: section.quantity(
                    "ripple",
                    Dimension::Decibel,
                    Range::Within(0.001, 6.0),
                )?,
            }
        } else {
            BandShape::Butterworth
        },
        order: section
            .maybe_whole("order", 1, u64::from(MAX_POLES))?
            .unwrap_or(3) as u32,
        bandwidth_hz: section.quantity("bandwidth", Dimension::Frequency, Range::Positive)?,
        loss_db: section
            .maybe_quantity("loss", Dimension::Decibel, Range::Within(0.0, 20.0))?
            .unwrap_or(0.0),
        stop_band: section
            .maybe_choice(
                "stop_band",
                &[
                    ("absorbed", StopBand::Absorbed),
                    ("reflected", StopBand::Reflected),
                ],
            )?
            .unwrap_or(StopBand::Absorbed),
    };
    section.finish()?;
    Ok(filter)
}

fn outphase(section: &Section<'_>) -> Result<OutphaseScheme, Problem> {
    let Some(joined) =
        section.maybe_choice("combining", &[("isolated", false), ("joined", true)])?
    else {
        return Err(section.problem("combining", "\"isolated\" or \"joined\""));
    };
    let combining = if joined {
        Combining::Joined(JoinedScheme {
            joint: joint(section)?,
            law: section
                .maybe_choice("law", &ANGLE_LAWS)?
                .unwrap_or(AngleLaw::Inverse),
        })
    } else {
        Combining::Isolated
    };
    let mismatch = section.maybe_section("mismatch")?;
    let mut scheme = OutphaseScheme {
        combining,
        bandwidth_hz: section.maybe_quantity(
            "branch_bandwidth",
            Dimension::Frequency,
            Range::Positive,
        )?,
        order: section
            .maybe_whole("branch_order", 1, u64::from(MAX_ORDER))?
            .unwrap_or(2) as u32,
        ..OutphaseScheme::default()
    };
    if let Some(mismatch) = mismatch {
        scheme.gain_mismatch_db = mismatch
            .maybe_quantity("gain", Dimension::Decibel, Range::Within(0.0, 20.0))?
            .unwrap_or(0.0);
        scheme.phase_mismatch_rad = mismatch
            .maybe_quantity("phase", Dimension::Angle, Range::Within(-1.0, 1.0))?
            .unwrap_or(0.0);
        scheme.delay_mismatch_s = delay(&mismatch)?;
        mismatch.finish()?;
    }
    Ok(scheme)
}

const SHAPES: [(&str, Shape); 3] = [
    ("corner", Shape::Corner),
    ("hyperbola", Shape::Hyperbola),
    ("exponential", Shape::Exponential),
];

fn supply(section: &Section<'_>) -> Result<SupplyScheme, Problem> {
    let floor = section
        .maybe_quantity("floor", Dimension::Ratio, Range::Within(0.0, 0.9))?
        .unwrap_or(0.0);
    let shape = section
        .maybe_choice("shaping", &SHAPES)?
        .unwrap_or(Shape::Exponential);
    let modulator = section
        .maybe_section("modulator")?
        .map(|s| modulator(&s))
        .transpose()?;
    let phase_path = section
        .maybe_section("phase_path")?
        .map(|s| phase_path(&s))
        .transpose()?;
    Ok(SupplyScheme {
        shaping: Shaping { shape, floor },
        modulator: modulator.unwrap_or_default(),
        phase_path: phase_path.unwrap_or_default(),
    })
}

pub(super) fn order(section: &Section<'_>) -> Result<u32, Problem> {
    Ok(section
        .maybe_whole("order", 1, u64::from(MAX_ORDER))?
        .unwrap_or(2) as u32)
}

/// Dead times longer than this are no dead times of a transmitter, and their buffers would not fit.
const MAX_DELAY_S: f64 = 1e-3;

pub(super) fn delay(section: &Section<'_>) -> Result<f64, Problem> {
    let allowed = Range::Within(0.0, MAX_DELAY_S);
    Ok(section
        .maybe_quantity("delay", Dimension::Time, allowed)?
        .unwrap_or(0.0))
}

fn phase_path(section: &Section<'_>) -> Result<PhasePath, Problem> {
    let path = PhasePath {
        delay_s: delay(section)?,
        bandwidth_hz: section.maybe_quantity("bandwidth", Dimension::Frequency, Range::Positive)?,
        order: order(section)?,
    };
    section.finish()?;
    Ok(path)
}
