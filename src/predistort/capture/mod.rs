//! The next table from a captured pair: the wanted signal, and what the transmitter made of it behind the
//! table in force.
//!
//! ```text
//! scout    some pairs of every cell of |x|      -> a robust line and a spread for each
//! cloud    all pairs within four spreads        -> the stage's output over the control it was given
//! next     the inverse of that, damped          -> the next table
//! judge    is more to be had, and did the last one help?
//! ```

mod cloud;
mod judge;
mod next;
mod scout;

pub use cloud::{Cloud, InForce, StagePoint, StaticFit};
pub(super) use scout::FEWEST;

pub use judge::{HELPS_DB, LoopEnd, Pass, StoppedBy, judge_pass};
pub use next::{NextRequest, NextTable, StageCurve, next_table};
pub use scout::{Scout, ScoutLines};
