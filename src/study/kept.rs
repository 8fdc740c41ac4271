//! Both streams of a signal that is short enough, kept from the first pass for the second.

use num_complex::Complex64;

/// Instants kept at most: 256 MB, and half as much again beside a replay.
pub(super) const MOST: u64 = 1 << 23;

/// What the second pass needs of every instant that counts.
#[derive(Debug, Default)]
pub(super) struct Kept {
    pub wanted: Vec<Complex64>,
    pub output_v: Vec<Complex64>,
    /// What the map makes of the same track, beside a replay; else empty.
    pub by_map_v: Vec<Complex64>,
}
