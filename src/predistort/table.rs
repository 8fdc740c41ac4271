//! A static table from the inverse map.
//!
//! For the wanted magnitude `m` of an entry, a part of the control's range:
//!
//! ```text
//! wanted output   a(m) = A target(m)          A: output at address 1
//! target          m, or the scheme's shaping of m with the output at the control's floor as its floor
//! control         v(m) = branch^-1(a(m)), held within the branch and above the floor
//! phase           -(phase(v(m)) - phase(v(1)))
//! ```

use super::branch::{Branch, BranchError};
use super::capture::{FEWEST, Pass};
use super::request::{BelowFloor, TableRequest};
use crate::drive::{Lookup, LookupError, Shaping, Word};
use crate::map::{Control, Map};

/// Whether an entry could be inverted, and what was done where not.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum EntryState {
    /// The control is the inverse of the map.
    Inverted,
    /// The inverse, of an output that the scheme's floor has moved by more than half a step.
    MovedByFloor,
    /// Held at the scheme's floor: the wanted output is lower.
    HeldAtFloor,
    /// Held at the bottom of the map's rising branch: the wanted output is lower.
    HeldAtBottom,
    /// Held at the top of the map's rising branch: the wanted output is higher.
    HeldAtTop,
    /// The inverse, in a stretch without map points: as good as the interpolation there.
    InGap,
    /// Of a capture that never had this magnitude: the entry before it, moved to join what was seen.
    NotSeen,
}

impl EntryState {
    /// In words, and what was done.
    pub fn text(self) -> &'static str {
        match self {
            Self::Inverted => "inverted",
            Self::MovedByFloor => "moved by the scheme's floor (its shaping is followed)",
            Self::HeldAtFloor => "held at the scheme's floor (less output is wanted)",
            Self::HeldAtBottom => {
                "held at the bottom of the map's rising branch (less output is wanted)"
            }
            Self::HeldAtTop => "held at the top of the map's rising branch (more output is wanted)",
            Self::InGap => "inverted across a gap of the map (interpolated)",
            Self::NotSeen => {
                "not seen in the capture (as before, moved to join the nearest magnitude seen)"
            }
        }
    }
}

/// One entry before rounding.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Entry {
    /// Wanted magnitude, a part of the control's range.
    pub magnitude: f64,
    /// Control, a part of its range.
    pub control: f64,
    /// Correction of the phase, rad.
    pub phase_rad: f64,
    /// Whether it could be inverted.
    pub state: EntryState,
}

/// How many entries are in which state.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, serde::Serialize)]
pub struct EntryCounts {
    /// [`EntryState::Inverted`]
    pub inverted: usize,
    /// [`EntryState::MovedByFloor`]
    pub moved_by_floor: usize,
    /// [`EntryState::HeldAtFloor`]
    pub held_at_floor: usize,
    /// [`EntryState::HeldAtBottom`]
    pub held_at_bottom: usize,
    /// [`EntryState::HeldAtTop`]
    pub held_at_top: usize,
    /// [`EntryState::InGap`]
    pub in_gap: usize,
    /// [`EntryState::NotSeen`]
    pub not_seen: usize,
}

impl EntryCounts {
    /// Number and state of all that are not empty, in the order of the fields.
    pub fn rows(&self) -> Vec<(usize, EntryState)> {
        [
            (self.inverted, EntryState::Inverted),
            (self.moved_by_floor, EntryState::MovedByFloor),
            (self.held_at_floor, EntryState::HeldAtFloor),
            (self.held_at_bottom, EntryState::HeldAtBottom),
            (self.held_at_top, EntryState::HeldAtTop),
            (self.in_gap, EntryState::InGap),
            (self.not_seen, EntryState::NotSeen),
        ]
        .into_iter()
        .filter(|(count, _)| *count > 0)
        .collect()
    }
}

/// Why no table can be made.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum TableError {
    /// The map has no inverse anywhere.
    #[error(transparent)]
    Branch(#[from] BranchError),
    /// The sizes make no table.
    #[error(transparent)]
    Lookup(#[from] LookupError),
    /// A capture that shows no stage.
    #[error(
        "the capture shows no amplitude that rises with the control: two different magnitudes at least must be held for {FEWEST} samples each"
    )]
    NothingSeen,
}

/// A table and where it came from.
#[derive(Debug, Clone, PartialEq)]
pub struct Table {
    /// As the front end applies it.
    pub lookup: Lookup,
    /// Its entries before rounding; empty for a table from a file, which holds words only.
    pub entries: Vec<Entry>,
    /// Full range of the control: V for a supply.
    pub full_control: f64,
    /// What the control is.
    pub control: Control,
    /// What captures showed of this table's forerunners, the first one first; empty for a table from a map.
    pub passes: Vec<Pass>,
    /// Output amplitude at address 1, V, where it is known.
    pub full_output_v: Option<f64>,
    /// What it says about itself.
    pub title: String,
}

impl Table {
    /// The table of `request` for `map`, whose control has the range `full_control`, under the scheme's `shaping`.
    ///
    /// # Errors
    /// [`TableError`].
    pub fn from_map(
        title: &str,
        map: &Map,
        full_control: f64,
        shaping: &Shaping,
        request: &TableRequest,
    ) -> Result<Self, TableError> {
        if !request.size.is_allowed() {
            return Err(LookupError::Size {
                given: request.size,
            }
            .into());
        }
        let branch = Branch::of(map)?;
        let full_output_v = request.full_output_v.unwrap_or(branch.reach_v.1);
        let floor_v = branch.output_v(shaping.floor * full_control);
        let maker = Maker {
            map,
            branch: &branch,
            full_control,
            shaping,
            target: Shaping {
                shape: shaping.shape,
                floor: if shaping.floor > 0.0 && request.below_floor == BelowFloor::Shaped {
                    floor_v / full_output_v
                } else {
                    0.0
                },
            },
            request,
            full_output_v,
        };
        let steps = (request.size.depth - 1) as f64;
        let entries: Vec<Entry> = (0..request.size.depth)
            .map(|index| maker.entry(request.spacing.magnitude(index as f64 / steps)))
            .collect();
        let words = entries
            .iter()
            .map(|entry| Word {
                control: request.size.control_word(entry.control),
                phase: request.size.phase_word(entry.phase_rad),
            })
            .collect();
        Ok(Self {
            lookup: Lookup::new(
                request.size,
                request.spacing,
                request.between,
                request.rate,
                words,
            )?,
            entries,
            full_control,
            control: map.control(),
            passes: Vec::new(),
            full_output_v: Some(maker.full_output_v),
            title: title.to_owned(),
        })
    }

    /// How many entries could be inverted, and what was done with the others; all zero for a table from a file.
    pub fn counts(&self) -> EntryCounts {
        let count = |state| {
            self.entries
                .iter()
                .filter(|entry| entry.state == state)
                .count()
        };
        EntryCounts {
            inverted: count(EntryState::Inverted),
            moved_by_floor: count(EntryState::MovedByFloor),
            held_at_floor: count(EntryState::HeldAtFloor),
            held_at_bottom: count(EntryState::HeldAtBottom),
            held_at_top: count(EntryState::HeldAtTop),
            in_gap: count(EntryState::InGap),
            not_seen: count(EntryState::NotSeen),
        }
    }
}

struct Maker<'a> {
    map: &'a Map,
    branch: &'a Branch<'a>,
    full_control: f64,
    shaping: &'a Shaping,
    /// From the wanted magnitude to the wanted output, both parts of full range.
    target: Shaping,
    request: &'a TableRequest,
    full_output_v: f64,
}

impl Maker<'_> {
    /// The control, in its own unit, for the output `amplitude_v`, and what was done.
    fn control(&self, amplitude_v: f64) -> (f64, EntryState) {
        let floor = self.shaping.floor * self.full_control;
        let found = self.branch.control_for(amplitude_v);
        let (low, high) = self.branch.reach_v;
        // The last digits of a product are no saturation.
        let slack = 1e-12 * high;
        if self.request.below_floor == BelowFloor::Held && found < floor {
            (floor, EntryState::HeldAtFloor)
        } else if amplitude_v < low - slack {
            (found, EntryState::HeldAtBottom)
        } else if amplitude_v > high + slack {
            (found, EntryState::HeldAtTop)
        } else if self.branch.in_gap(found) {
            (found, EntryState::InGap)
        } else {
            (found, EntryState::Inverted)
        }
    }

    fn phase_rad(&self, control: f64) -> f64 {
        let (low, high) = self.map.domain();
        self.map
            .phase_at_rad(control.clamp(low, high))
            .unwrap_or(0.0)
    }

    fn entry(&self, magnitude: f64) -> Entry {
        let target = self.target.apply(magnitude);
        let (control, mut state) = self.control(self.full_output_v * target);
        let moved = target - magnitude;
        if state == EntryState::Inverted && moved > 0.5 * self.request.size.control_step() {
            state = EntryState::MovedByFloor;
        }
        let (top, _) = self.control(self.full_output_v * self.target.apply(1.0));
        Entry {
            magnitude,
            control: control / self.full_control,
            phase_rad: self.phase_rad(top) - self.phase_rad(control),
            state,
        }
    }
}
