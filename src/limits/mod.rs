//! Published transmitter limits and the user's own.
//!
//! A [`LimitSet`] is one named set with where its numbers come from; [`Library`] holds the published
//! sets and takes the user's; [`Limits`] is what a study asks for. Limits hold at and below: a
//! reading equal to its limit is within.

mod consistent;
mod library;
mod mask;
mod needs;
mod read;
mod read_mask;
mod read_rows;
mod read_term;
mod request;
mod rows;
mod set;
mod table;
mod terms;
#[cfg(test)]
mod tests;
mod words;

pub use library::{Library, UnknownSet};
pub use mask::{Conditions, Corner, LimitLevel, Mask, NotStated, Segment};
pub use needs::Unmet;
pub(crate) use needs::{close, same_modulation};
pub use read::read_sets;
pub use request::{AcprLimit, Limits, LimitsRequest};
pub use rows::{
    Adjacent, AdjacentRow, Applies, ErrorRow, MainFilter, Modulation, SignalFormat, Spurious,
    SpuriousRow, Statistic,
};
pub use set::{CheckPoint, Confidence, Kind, LimitSet, Obtained, Provenance};
pub use table::{Evaluated, Level, evaluate, table_rows};
pub use terms::{Combine, Detector, Origin, Placement, Reference, Term};
