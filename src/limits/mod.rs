//! Published transmitter limits and the user's own.
//!
//! A [`LimitSet`] is one named set with where its numbers come from; [`Library`] holds the published
//! sets and takes the user's; [`Limits`] is what a study asks for. Limits hold at and below: a
//! reading equal to its limit is within.

mod library;
mod mask;
mod read;
mod read_mask;
mod read_rows;
mod request;
mod rows;
mod set;
#[cfg(test)]
mod tests;
mod words;

pub use library::{Library, UnknownSet};
pub use mask::{
    Combine, Conditions, Corner, Detector, LimitLevel, Mask, NotStated, Origin, Placement,
    Reference, Segment, Term,
};
pub use read::read_sets;
pub use request::{AcprLimit, Limits, LimitsRequest, Unmet};
pub(crate) use request::{close, same_modulation};
pub use rows::{
    Adjacent, AdjacentRow, Applies, ErrorRow, MainFilter, Modulation, SignalFormat, Spurious,
    SpuriousRow, Statistic,
};
pub use set::{CheckPoint, Confidence, Kind, LimitSet, Obtained, Provenance};
