//! The limits of a mask as polylines, for pictures.

use serde::Serialize;

use super::mask::MaskJudge;
use super::outcome::Side;
use super::wanted::bandwidth_hz;
use crate::limits::{Conditions, Detector, Mask, NotStated, Segment, Term};

/// Points along a segment whose limit bends.
const BENT_POINTS: usize = 33;

/// The limit on one side over neighbouring segments that are read in one bandwidth.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct MaskLine {
    /// The set.
    pub set: String,
    /// Which side of the carrier.
    pub side: Side,
    /// The bandwidth that levels are in, Hz.
    pub bandwidth_hz: f64,
    /// How readings are taken.
    pub detector: Detector,
    /// Offset from the carrier (negative below it), Hz, and level, dBm in the bandwidth. Away from the carrier.
    pub points: Vec<(f64, f64)>,
}

/// The limit of `segment` at points from its start to its end or `until_hz`, distances from the carrier.
fn points(
    mask: &Mask,
    segment: &Segment,
    conditions: &Conditions,
    until_hz: f64,
) -> Result<Vec<(f64, f64)>, NotStated> {
    let origin_hz = mask.origin_hz(conditions)?;
    let (from_hz, to_hz) = segment.ends_hz(conditions)?;
    let to_hz = to_hz.min(until_hz - origin_hz);
    if to_hz < from_hz {
        return Ok(Vec::new());
    }
    let flat = segment
        .terms
        .iter()
        .all(|term| !matches!(term, Term::Linear { .. } | Term::Log { .. }));
    let count = if from_hz == to_hz {
        1
    } else if flat {
        2
    } else {
        BENT_POINTS
    };
    (0..count)
        .map(|at| {
            let offset_hz = if at + 1 == count && count > 1 {
                to_hz
            } else {
                from_hz + (to_hz - from_hz) * at as f64 / (count.max(2) - 1) as f64
            };
            let level = segment.level(offset_hz, conditions)?;
            let level = match conditions.reference_dbm {
                Some(reference_dbm) => {
                    let dbm = level.dbm(reference_dbm);
                    mask.floor_dbm.map_or(dbm, |floor_dbm| dbm.max(floor_dbm))
                }
                // Against a reference at 0: dB for relative limits, dBm for absolute ones.
                None => level.dbm(0.0),
            };
            Ok((origin_hz + offset_hz, level))
        })
        .collect()
}

/// The limit of `mask` over the offset from the carrier, up to `until_hz` on both sides: the lower
/// side from far to near, then the upper from near to far. A picture breaks the line between the two
/// where the first offset is not 0. Levels are dBm in each segment's own bandwidth where
/// `conditions.reference_dbm` is known, else dB against the reference (dBm for absolute limits).
///
/// # Errors
/// A condition that the limit needs and is not stated.
pub fn mask_polyline(
    mask: &Mask,
    class: Option<&str>,
    conditions: &Conditions,
    until_hz: f64,
) -> Result<Vec<(f64, f64)>, NotStated> {
    let conditions = mask.with_own(conditions);
    let mut upper = Vec::new();
    for (_, segment) in mask.segments_for(class, &conditions)? {
        upper.extend(points(mask, segment, &conditions, until_hz)?);
    }
    let lower = upper.iter().rev().map(|(hz, level)| (-hz, *level));
    Ok(lower.chain(upper.iter().copied()).collect())
}

/// The lines of a mask that was judged; `references` holds each segment's reference, dBm.
pub(super) fn lines_of(judge: &MaskJudge<'_>, references: &[Option<f64>]) -> Vec<MaskLine> {
    let Ok(chosen) = judge.mask.segments_for(judge.class, &judge.conditions) else {
        return Vec::new();
    };
    let (_, until_hz) = judge.measured.fine.range_hz();
    let mut lines: Vec<MaskLine> = Vec::new();
    for side in [Side::Lower, Side::Upper] {
        let mut open: Option<MaskLine> = None;
        for (index, segment) in &chosen {
            let Some(Some(reference_dbm)) = references.get(*index) else {
                continue;
            };
            let conditions = Conditions {
                reference_dbm: Some(*reference_dbm),
                ..judge.conditions
            };
            let Ok(points) = points(judge.mask, segment, &conditions, until_hz) else {
                continue;
            };
            let Some((start_hz, _)) = points.first().copied() else {
                continue;
            };
            let points = points.into_iter().map(|(hz, dbm)| (side.sign() * hz, dbm));
            let bandwidth_hz = bandwidth_hz(segment.bw_hz, &judge.conditions);
            match &mut open {
                Some(line)
                    if line.bandwidth_hz == bandwidth_hz
                        && line
                            .points
                            .last()
                            .is_some_and(|(end_hz, _)| end_hz.abs() == start_hz) =>
                {
                    line.points.extend(points);
                }
                _ => {
                    lines.extend(open.take());
                    open = Some(MaskLine {
                        set: judge.set.name.clone(),
                        side,
                        bandwidth_hz,
                        detector: judge.mask.detector,
                        points: points.collect(),
                    });
                }
            }
        }
        lines.extend(open);
    }
    lines
}
