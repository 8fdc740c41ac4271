//! The mean of all periods of a capture against its reference: what comes again, apart from noise.

use std::sync::Arc;

use num_complex::Complex64;
use serde::Serialize;

use super::error::StudyError;
use super::result::SignalFacts;
use crate::math::kernel::{Kernel, Rotation, Sampler};
use crate::metrics::Sync;
use crate::signal::Source;
use crate::units::db;

/// Longest period that is averaged, samples of the reference: it takes 64 MB.
const LONGEST: u64 = 1 << 22;

/// What the mean of all periods shows.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Averaged {
    /// Whole periods averaged.
    pub periods: u64,
    /// RMS error of the mean period over the reference's RMS, percent, over all of the reference's band.
    pub evm_percent: f64,
    /// The same as a mean square, dB.
    pub nmse_db: f64,
    /// RMS of what changes from period to period over the reference's RMS, percent: noise.
    pub noise_percent: f64,
}

/// Averages the whole periods that were compared, on the reference's own grid; `None` where there are not
/// two of them, the period is too long to hold, or the capture's rate is below the reference's.
pub(super) fn average(
    capture: &mut dyn Source,
    reference: &mut dyn Source,
    sent: &SignalFacts,
    sync: &Sync,
) -> Result<Option<Averaged>, StudyError> {
    let grid = sync.grid;
    let period = sent.samples;
    if period > LONGEST || grid.step > 1.0 + 1e-3 {
        return Ok(None);
    }
    // Whole periods inside what was compared, a kernel's reach away from its ends.
    let kernel = Arc::new(Kernel::interpolator(0.5 * grid.step.min(1.0)));
    let guard = kernel.half() as f64 + 1.0;
    let first = grid.at(sync.from as f64 + guard).ceil();
    let last = grid.at(sync.to as f64 - 1.0 - guard).floor();
    let periods = ((last - first + 1.0) / period as f64).floor();
    if periods < 2.0 {
        return Ok(None);
    }
    let periods = periods as u64;
    let total = periods * period;
    let start = grid.centre + (first - grid.position) / grid.step;
    let mut sampler = Sampler::new(kernel, start, 1.0 / grid.step);
    let rotation = Rotation {
        cycles: grid.cycles,
        change: grid.change,
    };
    let unscale = 1.0 / sync.gain;
    let mut sums = vec![Complex64::ZERO; period as usize];
    let phase = (first as i64).rem_euclid(period as i64) as u64;
    let (mut taken, mut energy, mut at) = (0u64, 0.0, 0u64);
    let mut block = vec![Complex64::ZERO; 1 << 14];
    capture.rewind()?;
    while taken < total {
        let count = capture.read(&mut block)?;
        if count == 0 {
            break;
        }
        rotation.turn(at as f64 - grid.centre, &mut block[..count]);
        at += count as u64;
        sampler.push(&block[..count], |value, _| {
            if taken < total {
                let value = value * unscale;
                energy += value.norm_sqr();
                sums[((phase + taken) % period) as usize] += value;
                taken += 1;
            }
        });
    }
    if taken < total {
        return Ok(None);
    }
    let scale = 1.0 / periods as f64;
    let (mut xx, mut yy, mut xy) = (0.0, 0.0, Complex64::ZERO);
    reference.rewind()?;
    let mut index = 0usize;
    loop {
        let count = reference.read(&mut block)?;
        if count == 0 {
            break;
        }
        for (x, sum) in block[..count].iter().zip(&sums[index..]) {
            let y = sum * scale;
            xx += x.norm_sqr();
            yy += y.norm_sqr();
            xy += x.conj() * y;
        }
        index += count;
    }
    // Scatter around the mean, with the degree of freedom that the mean took.
    let scatter = (energy - yy * periods as f64).max(0.0) / (periods - 1) as f64;
    let rest = (yy - xy.norm_sqr() / xx).max(0.0) / (xy.norm_sqr() / xx);
    Ok(Some(Averaged {
        periods,
        evm_percent: 100.0 * rest.sqrt(),
        nmse_db: db(rest),
        noise_percent: 100.0 * (scatter / (xy.norm_sqr() / xx)).sqrt(),
    }))
}
