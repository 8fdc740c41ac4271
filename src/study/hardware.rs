//! The hardware of a study: its map, and the stage at full control where there is one.

use super::error::StudyError;
use super::load::{Hardware, Study};
use super::result::StageFacts;
use super::shapes::{joined_shapes, shapes};
use crate::drive::{AngleReach, ClassBScheme, Combining, LevelsScheme, OutphaseScheme, Scheme};
use crate::map::{AngleSweep, Control, Map, Sweep};
use crate::orbit::{Drive, Gating, Joined, Joint, Network, OrbitError};
use crate::stage::Stage;

/// Points of a map solved for a check.
const MAP_POINTS: usize = 201;

/// Points of a map over the angle of two joined stages: a quarter of a degree apart.
const ANGLE_POINTS: usize = 721;

/// Points of the width maps of a curved stage at lower supplies.
const PLANE_POINTS: usize = 101;

/// Their distance while a rail settles, as a part of the full supply.
const PLANE_DISTANCE: f64 = 0.1;

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
pub(super) fn hardware(study: &Study) -> Result<(Map, Option<StageFacts>), StudyError> {
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
