//! How much of what an output does beyond one gain is static bend, how much a linear filter, how much bend with
//! memory.
//!
//! ```text
//! y(n) = sum_m sum_k c_mk x(n - m s) |x(n - m s)|^k        m = -A..M, k = 0..K, s samples apart
//! ```
//!
//! the memory polynomial (L. Ding et al., "A robust digital baseband predistorter constructed using memory
//! polynomials", IEEE Trans. Commun., Jan. 2004, from memory), with lags ahead as well: the alignment puts the output
//! in the middle of its response. Coefficients are least squares on one half of the pairs, every figure is of the
//! other half: a model that only follows the noise gains nothing.

use num_complex::Complex64;
use serde::Serialize;

use crate::math::least_squares::LeastSquares;
use crate::units::db;

/// Stretches taken out of the capture, evenly; every second one is held out.
const STRETCHES: u64 = 64;

/// Pairs a stretch, at most: 65,536 in all.
const STRETCH: u64 = 1024;

/// Fewest pairs that a fit rests on.
const FEWEST: usize = 4096;

/// A size this close to the best is as good, dB.
const AS_GOOD_DB: f64 = 0.3;

/// Lags ahead and behind that are tried.
const LAGS: [(usize, usize); 5] = [(0, 0), (0, 1), (1, 1), (2, 2), (2, 4)];

/// Highest powers of the envelope that are tried.
const POWERS: [usize; 4] = [0, 2, 4, 6];

const AHEAD: usize = 2;
const BEHIND: usize = 4;
const HIGHEST: usize = 6;

/// Which terms a model has.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
pub struct MemorySize {
    /// Highest power of the envelope, K.
    pub power: usize,
    /// Lags ahead of the output, A.
    pub ahead: usize,
    /// Lags behind it, M.
    pub behind: usize,
}

impl MemorySize {
    fn is_memoryless(&self) -> bool {
        self.ahead + self.behind == 0
    }

    /// Number of coefficients.
    pub fn terms(&self) -> usize {
        (self.power + 1) * (self.ahead + self.behind + 1)
    }

    /// Its columns among those of the largest model.
    fn columns(&self) -> Vec<usize> {
        (AHEAD - self.ahead..=AHEAD + self.behind)
            .flat_map(|lag| (0..=self.power).map(move |power| lag * (HIGHEST + 1) + power))
            .collect()
    }
}

/// One size and how it does.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct MemoryCandidate {
    /// The size.
    pub size: MemorySize,
    /// Number of coefficients.
    pub terms: usize,
    /// What it leaves of the half held out, over the output's power, dB.
    pub held_out_nmse_db: f64,
    /// Condition number of its columns at norm one.
    pub condition: f64,
    /// Largest magnitude of a coefficient, over the linear gain.
    pub largest_coefficient: f64,
}

/// What the models leave.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct MemoryFit {
    /// Distance of neighbouring lags, samples of the capture.
    pub lag_samples: usize,
    /// Pairs that were fitted; as many were held out.
    pub samples: u64,
    /// One complex gain.
    pub linear: MemoryCandidate,
    /// The cheapest polynomial without memory within 0.3 dB of the best.
    pub memoryless: MemoryCandidate,
    /// The cheapest filter without bend within 0.3 dB of the best.
    pub filter: MemoryCandidate,
    /// The cheapest of all within 0.3 dB of the best.
    pub memory: MemoryCandidate,
    /// All sizes tried, cheapest first.
    pub candidates: Vec<MemoryCandidate>,
}

impl MemoryFit {
    /// How much better the best model does with memory than without, dB.
    pub fn memory_gain_db(&self) -> f64 {
        (self.memoryless.held_out_nmse_db - self.memory.held_out_nmse_db).max(0.0)
    }
}

/// Keeps stretches of a pair of streams.
#[derive(Debug, Clone)]
pub struct MemoryMeter {
    every: u64,
    length: u64,
    seen: u64,
    stretches: Vec<(Vec<Complex64>, Vec<Complex64>)>,
}

impl MemoryMeter {
    /// For `samples` pairs to come.
    pub fn new(samples: u64) -> Self {
        let every = (samples / STRETCHES).max(1);
        Self {
            every,
            length: every.min(STRETCH),
            seen: 0,
            stretches: Vec::new(),
        }
    }

    /// Takes the next pairs of a reference and an output.
    pub fn push(&mut self, reference: &[Complex64], output: &[Complex64]) {
        let count = reference.len().min(output.len()) as u64;
        let mut at = 0;
        while at < count {
            let inside = (self.seen + at) % self.every;
            if inside == 0 && (self.stretches.len() as u64) < STRETCHES {
                self.stretches.push((Vec::new(), Vec::new()));
            }
            if inside >= self.length {
                at += self.every - inside;
                continue;
            }
            let take = (self.length - inside).min(count - at);
            let range = at as usize..(at + take) as usize;
            if (self.seen + at) / self.every < STRETCHES
                && let Some((x, y)) = self.stretches.last_mut()
            {
                x.extend_from_slice(&reference[range.clone()]);
                y.extend_from_slice(&output[range]);
            }
            at += take;
        }
        self.seen += count;
    }

    /// The models; `occupied` is the reference's occupied bandwidth over the rate. Lags are about an eighth of
    /// its reciprocal apart. `None` where too little was captured, or nothing can be fitted.
    pub fn finish(self, occupied: f64) -> Option<MemoryFit> {
        let apart = (0.125 / occupied).floor();
        let lag_samples = if apart.is_finite() {
            (apart as usize).clamp(1, 64)
        } else {
            1
        };
        let columns = (AHEAD + BEHIND + 1) * (HIGHEST + 1);
        let mut halves = [LeastSquares::new(columns), LeastSquares::new(columns)];
        let mut counts = [0, 0];
        for (index, (x, y)) in self.stretches.iter().enumerate() {
            for at in BEHIND * lag_samples..y.len().saturating_sub(AHEAD * lag_samples) {
                let row = (0..=AHEAD + BEHIND).flat_map(|lag| {
                    let sample = x[at + AHEAD * lag_samples - lag * lag_samples];
                    let envelope = sample.norm_sqr().sqrt();
                    let mut value = sample;
                    (0..=HIGHEST).map(move |power| {
                        if power > 0 {
                            value *= envelope;
                        }
                        value
                    })
                });
                halves[index % 2].push(row, y[at]);
                counts[index % 2] += 1;
            }
        }
        if counts[0].min(counts[1]) < FEWEST {
            return None;
        }
        let [fitted, held_out] = &halves;
        let mut candidates = Vec::new();
        for (ahead, behind) in LAGS {
            for power in POWERS {
                let size = MemorySize {
                    power,
                    ahead,
                    behind,
                };
                candidates.extend(candidate(size, fitted, held_out));
            }
        }
        candidates.sort_by_key(|candidate| candidate.terms);
        let cheapest = |allowed: fn(&MemorySize) -> bool| {
            let of: Vec<_> = candidates.iter().filter(|c| allowed(&c.size)).collect();
            let best = of
                .iter()
                .map(|c| c.held_out_nmse_db)
                .fold(f64::INFINITY, f64::min);
            of.into_iter()
                .find(|c| c.held_out_nmse_db <= best + AS_GOOD_DB)
                .copied()
        };
        Some(MemoryFit {
            lag_samples,
            samples: counts[0] as u64,
            linear: cheapest(|size| size.is_memoryless() && size.power == 0)?,
            memoryless: cheapest(MemorySize::is_memoryless)?,
            filter: cheapest(|size| size.power == 0)?,
            memory: cheapest(|_| true)?,
            candidates,
        })
    }
}

/// Fits `size` on one half and holds it against the other; nothing where its columns depend on each other.
fn candidate(
    size: MemorySize,
    fitted: &LeastSquares,
    held_out: &LeastSquares,
) -> Option<MemoryCandidate> {
    let columns = size.columns();
    let gain = fitted.select(&[AHEAD * (HIGHEST + 1)]).solve(0.0).ok()?;
    let solution = fitted.select(&columns).solve(0.0).ok()?;
    let (missed, target) = held_out.select(&columns).missed(&solution.coefficients);
    let largest = solution
        .coefficients
        .iter()
        .map(|c| c.norm())
        .fold(0.0, f64::max);
    Some(MemoryCandidate {
        size,
        terms: columns.len(),
        held_out_nmse_db: db((missed / target).max(f64::MIN_POSITIVE)),
        condition: solution.condition,
        largest_coefficient: largest / gain.coefficients[0].norm(),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn white(count: usize, seed: u64) -> Vec<Complex64> {
        let mut state = seed;
        let mut draw = || {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1_442_695_040_888_963_407);
            (state >> 11) as f64 * 2f64.powi(-53) - 0.5
        };
        (0..count).map(|_| Complex64::new(draw(), draw())).collect()
    }

    /// Bend, echo and noise of known powers are told apart.
    #[test]
    fn bend_and_memory_and_noise_are_told_apart() {
        let x = white(60_000, 1);
        let noise = white(60_000, 2);
        for (cubic, echo, noisy) in [(0.2, 0.0, 1e-3), (0.0, 0.05, 1e-3), (0.2, 0.05, 1e-3)] {
            let mut meter = MemoryMeter::new(x.len() as u64);
            let y: Vec<_> = (0..x.len())
                .map(|n| {
                    let past = x[n.saturating_sub(1)];
                    2.0 * (x[n] * (1.0 - cubic * x[n].norm_sqr())
                        + echo * past * past.norm_sqr()
                        + noisy * noise[n])
                })
                .collect();
            for (x, y) in x.chunks(1000).zip(y.chunks(1000)) {
                meter.push(x, y);
            }
            let fit = meter.finish(0.9).unwrap();
            assert_eq!(fit.lag_samples, 1);
            // Noise of 1e-3 beside a signal as strong: -60 dB, a little more as the cubic takes from the signal.
            let best = fit.memory.held_out_nmse_db;
            assert!((-60.5..-59.0).contains(&best), "{best}");
            // Lone terms of the model: E|x|^2 |x|^4 over E|x|^2 for two uniform parts, -17.9 dB times echo^2.
            let has_memory = echo > 0.0;
            assert_eq!(fit.memory.size.behind > 0, has_memory, "{fit:?}");
            if has_memory {
                assert!(fit.memory_gain_db() > 10.0, "{fit:?}");
            } else {
                assert!(fit.memory_gain_db() < 0.3, "{fit:?}");
                assert!(fit.linear.held_out_nmse_db > fit.memoryless.held_out_nmse_db + 10.0);
            }
            assert!(fit.memory.condition > 1.0 && fit.memory.condition < 1e5);
        }
    }

    #[test]
    fn little_is_refused_and_stretches_cover_all() {
        let x = white(3000, 3);
        let mut meter = MemoryMeter::new(3000);
        meter.push(&x, &x);
        assert!(meter.finish(0.9).is_none());
        let mut meter = MemoryMeter::new(1_000_000);
        let block = white(10_000, 4);
        for _ in 0..100 {
            meter.push(&block, &block);
        }
        assert_eq!(meter.stretches.len(), STRETCHES as usize);
        assert!(
            meter
                .stretches
                .iter()
                .all(|(x, y)| x.len() == STRETCH as usize && y.len() == x.len())
        );
    }
}
