//! Masks: every segment on both sides, in its own bandwidth and against its own reference.

use super::judge::{Gathered, Measured, Ruling};
use super::outcome::{MaskMargin, Side, Unit};
use super::reading::{Bands, Reader, centres, level_dbm};
use super::reference::{Level, level};
use super::wanted::bandwidth_hz;
use crate::limits::{Conditions, LimitLevel, LimitSet, Mask, NotStated, Reference, Segment, Term};
use crate::units::show;

/// A fine spectrum coarser than this part of the measuring bandwidth smears what it reads.
const COARSEST_PART: f64 = 0.5;

/// One mask with what it is held against.
#[derive(Debug)]
pub(super) struct MaskJudge<'a> {
    pub set: &'a LimitSet,
    pub mask: &'a Mask,
    pub class: Option<&'a str>,
    pub conditions: Conditions,
    pub carrier_w: Option<f64>,
    pub measured: &'a Measured<'a>,
    pub bands: &'a Bands<'a>,
}

/// The worst point of one segment on one side.
#[derive(Debug, Clone, Copy)]
struct Worst {
    margin_db: f64,
    offset_hz: f64,
    level_dbm: f64,
    limit: LimitLevel,
}

/// How a segment ended.
enum Seen {
    /// Read, wholly or up to the sampled edge.
    Judged,
    /// Not read at all.
    Unseen,
    /// Met by its definition.
    Trivial,
}

impl MaskJudge<'_> {
    pub(super) fn run(&self, gathered: &mut Gathered) {
        let chosen = match self.mask.segments_for(self.class, &self.conditions) {
            Ok(chosen) => chosen,
            Err(error) => return self.undecided(gathered, self.set.name.clone(), error),
        };
        let mut before: Option<(&Segment, Seen)> = None;
        for (_, segment) in chosen {
            let continues = before.as_ref().is_some_and(|(earlier, seen)| {
                matches!(seen, Seen::Judged)
                    && segment.to.is_none()
                    && earlier.to == Some(segment.from)
                    && earlier.terms == segment.terms
                    && earlier.combine == segment.combine
            });
            match self.segment(segment, continues, gathered) {
                Ok(seen) => before = Some((segment, seen)),
                // What one segment misses, all do: it is said once.
                Err(error) => return self.undecided(gathered, self.set.name.clone(), error),
            }
        }
    }

    fn undecided(&self, gathered: &mut Gathered, name: String, error: NotStated) {
        gathered.undecided(Some(self.set), name, error.to_string());
    }

    /// The reference of every segment that can be read, by its place in the mask, dBm.
    pub(super) fn references(&self) -> Vec<Option<f64>> {
        self.mask
            .segments
            .iter()
            .map(|segment| {
                self.reader(segment)
                    .map(|reader| self.reference(&reader).dbm)
            })
            .collect()
    }

    fn reader(&self, segment: &Segment) -> Option<Reader<'_>> {
        let bandwidth_hz = bandwidth_hz(segment.bw_hz, &self.conditions);
        Reader::new(
            self.bands,
            self.measured.peak_hold,
            self.mask.detector,
            (bandwidth_hz, segment.sum_of_bw_hz),
        )
    }

    fn reference(&self, reader: &Reader<'_>) -> Level {
        level(
            self.mask.reference,
            reader,
            self.bands,
            self.measured,
            &self.conditions,
            self.carrier_w,
        )
    }

    fn segment(
        &self,
        segment: &Segment,
        continues: bool,
        gathered: &mut Gathered,
    ) -> Result<Seen, NotStated> {
        // The highest reading cannot exceed itself.
        if self.mask.reference == Reference::PeakPsdInChannel
            && matches!(segment.terms[..], [Term::Const { db }] if db >= 0.0)
        {
            return Ok(Seen::Trivial);
        }
        let origin_hz = self.mask.origin_hz(&self.conditions)?;
        let (from_hz, to_hz) = segment.ends_hz(&self.conditions)?;
        let (from_hz, to_hz) = (origin_hz + from_hz, origin_hz + to_hz);
        let name = format!("{}, {}", self.set.name, extent(from_hz, to_hz));
        let bandwidth_hz = bandwidth_hz(segment.bw_hz, &self.conditions);
        let Some(reader) = self.reader(segment) else {
            let reason = format!(
                "the segment is read by peak hold in {}, and no spectrum was taken so: give a longer signal or a rate at which that resolution is possible",
                show(segment.sum_of_bw_hz.unwrap_or(bandwidth_hz), "Hz", 4)
            );
            if continues {
                // The same limit was judged up to where the rule changes the bandwidth.
                gathered.warnings.push(format!("{name}: {reason}"));
            } else {
                gathered.undecided(Some(self.set), name, reason);
            }
            return Ok(Seen::Unseen);
        };
        let (start_hz, stop_hz) = centres(segment.placement, from_hz, to_hz, bandwidth_hz);
        let (low_hz, high_hz) = reader.centres_hz();
        // The two ends of a spectrum with an even number of bins differ by one bin.
        let edge_hz = high_hz.min(-low_hz);
        let slack_hz = 1e-6 * self.measured.fine.bin_hz;
        if start_hz > edge_hz + slack_hz {
            let needed_hz = start_hz + bandwidth_hz / 2.0;
            let reason = format!(
                "nothing was sampled there: the signal ends at {} from the carrier and the first reading reaches {}; a sample rate above {} shows it",
                show(self.measured.fine.range_hz().1, "Hz", 4),
                show(needed_hz, "Hz", 4),
                show(2.0 * needed_hz, "Hz", 4)
            );
            if continues {
                // The same limit was judged up to where the rule changes the bandwidth.
                gathered.warnings.push(format!("{name}: {reason}"));
            } else {
                gathered.undecided(Some(self.set), name, reason);
            }
            return Ok(Seen::Unseen);
        }
        let seen_hz = stop_hz.min(edge_hz);
        let reference = self.reference(&reader);
        let conditions = Conditions {
            reference_dbm: Some(reference.dbm),
            ..self.conditions
        };
        let mut tightest: Option<(Side, Worst)> = None;
        for side in [Side::Lower, Side::Upper] {
            let worst = self.worst(
                segment,
                &reader,
                (start_hz, seen_hz, origin_hz),
                side,
                &conditions,
            )?;
            gathered.mask.push(self.margin(
                (from_hz, to_hz.min(seen_hz.max(from_hz))),
                side,
                &worst,
                &reference,
                bandwidth_hz,
            ));
            if tightest.is_none_or(|(_, other)| worst.margin_db < other.margin_db) {
                tightest = Some((side, worst));
            }
        }
        let Some((side, worst)) = tightest else {
            return Ok(Seen::Unseen);
        };
        let mut reason = self.reason(segment, side, &worst, &reference);
        if segment.bw_hz == 0.0 {
            reason.push_str(&format!(
                "; the rule fixes no bandwidth, {} were taken",
                show(bandwidth_hz, "Hz", 4)
            ));
        }
        if stop_hz > seen_hz + slack_hz {
            let remark = format!(
                "judged up to {}, where the sampled range ends",
                show(seen_hz, "Hz", 4)
            );
            reason.push_str(&format!("; {remark}"));
            gathered.warnings.push(format!("{name}: {remark}"));
        }
        if let Reader::Mean { bands, .. } = &reader
            && bands.spectrum().enbw_hz > COARSEST_PART * bandwidth_hz
        {
            gathered.warnings.push(format!(
                "{name}: read in {} off a spectrum of {} resolution, which smears steep edges: a longer signal resolves more",
                show(bandwidth_hz, "Hz", 4),
                show(bands.spectrum().enbw_hz, "Hz", 4)
            ));
        }
        let (level_db, limit_db, unit) = shown(&worst, reference.dbm);
        let in_unit = |level: f64| format!("{level:.2} {}", unit.word());
        let ruling = Ruling {
            margin_db: worst.margin_db,
            found: in_unit(level_db),
            allowed: in_unit(limit_db),
            reason,
        };
        gathered.decided(Some(self.set), name, ruling);
        Ok(Seen::Judged)
    }

    /// The smallest margin with the centre from `start_hz` to `stop_hz` on `side`.
    fn worst(
        &self,
        segment: &Segment,
        reader: &Reader<'_>,
        (start_hz, stop_hz, origin_hz): (f64, f64, f64),
        side: Side,
        conditions: &Conditions,
    ) -> Result<Worst, NotStated> {
        let reference_dbm = conditions.reference_dbm.unwrap_or_default();
        let mut worst: Option<Worst> = None;
        for offset_hz in reader.sweep(start_hz, stop_hz) {
            let level_dbm = level_dbm(reader.power_w(side.sign() * offset_hz));
            let mut limit = segment.level((offset_hz - origin_hz).max(0.0), conditions)?;
            if let Some(floor_dbm) = self.mask.floor_dbm
                && limit.dbm(reference_dbm) < floor_dbm
            {
                limit = LimitLevel::Absolute { dbm: floor_dbm };
            }
            let margin_db = limit.dbm(reference_dbm) - level_dbm;
            if worst.is_none_or(|other| margin_db < other.margin_db) {
                worst = Some(Worst {
                    margin_db,
                    offset_hz,
                    level_dbm,
                    limit,
                });
            }
        }
        // A sweep has two centres at least; a limit that is no number compares with nothing.
        Ok(worst.unwrap_or(Worst {
            margin_db: f64::NAN,
            offset_hz: start_hz,
            level_dbm: f64::NAN,
            limit: LimitLevel::Absolute { dbm: f64::NAN },
        }))
    }

    fn margin(
        &self,
        (from_hz, to_hz): (f64, f64),
        side: Side,
        worst: &Worst,
        reference: &Level,
        bandwidth_hz: f64,
    ) -> MaskMargin {
        let (level_db, limit_db, unit) = shown(worst, reference.dbm);
        MaskMargin {
            set: self.set.name.clone(),
            from_hz,
            to_hz,
            side,
            margin_db: worst.margin_db,
            worst_hz: worst.offset_hz,
            level_db,
            limit_db,
            unit,
            reference_dbm: (self.mask.reference != Reference::AbsoluteDbm).then_some(reference.dbm),
            bandwidth_hz,
        }
    }

    fn reason(&self, segment: &Segment, side: Side, worst: &Worst, reference: &Level) -> String {
        let bandwidth_hz = bandwidth_hz(segment.bw_hz, &self.conditions);
        let detector = match segment.sum_of_bw_hz {
            Some(narrow_hz) => format!("sum of peak holds in {}", show(narrow_hz, "Hz", 4)),
            None => self.mask.detector.words().to_owned(),
        };
        let (level_db, limit_db, unit) = shown(worst, reference.dbm);
        let unit = unit.word();
        let against = if unit == "dB" {
            format!(" against {} of {:.2} dBm", reference.words, reference.dbm)
        } else {
            String::new()
        };
        let room = if worst.margin_db >= 0.0 {
            format!("{:.2} dB to spare", worst.margin_db)
        } else {
            format!("{:.2} dB too much", -worst.margin_db)
        };
        format!(
            "{} side, {} from the carrier: {level_db:.2} {unit} in {} ({detector}){against}, limit {limit_db:.2} {unit}: {room}",
            side.word(),
            show(worst.offset_hz, "Hz", 6),
            show(bandwidth_hz, "Hz", 4),
        )
    }
}

/// Reading and limit in the unit of the limit that decided.
fn shown(worst: &Worst, reference_dbm: f64) -> (f64, f64, Unit) {
    match worst.limit {
        LimitLevel::Both { db, dbm } if dbm < reference_dbm + db => {
            (worst.level_dbm, dbm, Unit::Dbm)
        }
        LimitLevel::Relative { db } | LimitLevel::Both { db, .. } => {
            (worst.level_dbm - reference_dbm, db, Unit::Decibel)
        }
        LimitLevel::Absolute { dbm } => (worst.level_dbm, dbm, Unit::Dbm),
    }
}

/// A stretch of offsets in words.
fn extent(from_hz: f64, to_hz: f64) -> String {
    let from = show(from_hz, "Hz", 6);
    if to_hz == from_hz {
        format!("at {from}")
    } else if to_hz.is_finite() {
        format!("{from} to {}", show(to_hz, "Hz", 6))
    } else {
        format!("{from} and beyond")
    }
}
