//! A stretch of cycles cut into segments that are replayed side by side.
//!
//! Each segment but the first starts on the orbit of its controls some cycles early, so early that the difference to
//! the true state has died away where it begins to count.

use super::error::ReplayError;
use super::{Cut, Cycle, CycleOutput, Replay};

/// How a stretch is cut.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Segments {
    /// Segments at a time.
    pub workers: usize,
    /// Cycles that a segment starts early.
    pub overlap: u64,
}

/// Replays `cycles` from the present state of `replay`, `outputs` in their order. A stretch that is not long against
/// the overlap is replayed in one.
///
/// # Errors
/// The first segment's that fails.
pub fn replay_all(
    replay: &mut Replay,
    cycles: &[Cycle],
    segments: Segments,
    outputs: &mut Vec<CycleOutput>,
) -> Result<(), ReplayError> {
    replay_cut(replay, cycles, &[], segments, outputs)
}

/// The same with cycles whose pulse changes within them; `cuts` in the order of time.
///
/// # Errors
/// As [`replay_all`].
pub fn replay_cut(
    replay: &mut Replay,
    cycles: &[Cycle],
    cuts: &[Cut],
    segments: Segments,
    outputs: &mut Vec<CycleOutput>,
) -> Result<(), ReplayError> {
    outputs.clear();
    outputs.resize(cycles.len(), CycleOutput::default());
    let overlap = usize::try_from(segments.overlap).unwrap_or(usize::MAX);
    let mut workers = segments.workers.max(1);
    while workers > 1 && cycles.len() / workers < overlap.saturating_mul(4) {
        workers -= 1;
    }
    let length = cycles.len().div_ceil(workers).max(1);
    let first_cycle = replay.cycles;
    let run = |replay: &mut Replay, from: usize, to: &mut [CycleOutput]| {
        let mut later = &cuts[cuts.partition_point(|cut| cut.cycle < from)..];
        for (at, output) in (from..).zip(to) {
            let own = later.iter().take_while(|cut| cut.cycle == at).count();
            let (own, rest) = later.split_at(own);
            later = rest;
            *output = replay.cycle_cut(&cycles[at], own)?;
        }
        Ok::<(), ReplayError>(())
    };
    if workers == 1 {
        return run(replay, 0, outputs);
    }
    let template = replay.clone();
    let results: Vec<Result<Replay, ReplayError>> = std::thread::scope(|scope| {
        let run = &run;
        let handles: Vec<_> = outputs
            .chunks_mut(length)
            .enumerate()
            .map(|(index, to)| {
                let mut own = template.clone();
                scope.spawn(move || {
                    let from = index * length;
                    if index > 0 {
                        let early = from - overlap;
                        own.cycles = first_cycle + early as u64;
                        own.settle(&cycles[early])?;
                        let mut forgotten = [CycleOutput::default(); 256];
                        for early in (early..from).step_by(forgotten.len()) {
                            let count = forgotten.len().min(from - early);
                            run(&mut own, early, &mut forgotten[..count])?;
                        }
                    }
                    run(&mut own, from, to)?;
                    Ok(own)
                })
            })
            .collect();
        handles
            .into_iter()
            .map(|handle| handle.join().unwrap_or(Err(ReplayError::NeverSettles)))
            .collect()
    });
    for result in results {
        *replay = result?;
    }
    Ok(())
}
