//! STEP 7: numbers against limits.
//!
//! [`Wanted::of`] says which spectra the limits need, [`judge`] holds what was measured against them.
//! A reading equal to its limit is within; a limit that nothing was read for is undecided, never within.

mod adjacent;
mod judge;
mod line;
mod mask;
mod outcome;
mod reading;
mod reference;
mod rows;
mod stress;
#[cfg(test)]
mod tests;
mod wanted;

pub use judge::{Judgement, Measured, Stress, judge};
pub use line::{MaskLine, mask_polyline};
pub use outcome::{Check, MaskMargin, Outcome, Side, Unit, Verdict};
pub use stress::{Ratings, Stressed};
pub use wanted::{Wanted, default_resolution_hz};
