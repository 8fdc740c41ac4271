//! Edges that fall between samples, as samples of what a band-limited observer sees.
//!
//! A level that jumps has an endless spectrum: sampled as it stands, its upper part folds back over the lower one. Here
//! every jump of size `a` at the exact time `tau` (in samples) counts with `a E(n - tau)`,
//!
//! ```text
//! E(u) = integral of K(v) exp(p (u - v)) dv over v < u,   K(v) = sinc(v) kaiser(v / 16)
//! ```
//!
//! the response of a pole `p` (a sample) to an impulse, seen through the low-pass `K`: `p = 0` is a step, anything else a
//! decay that starts at `tau`. `K` is flat to 0.4 of the sample rate and 100 dB down from 0.6 of it on (Kaiser's
//! design, tested below), so that nothing folds into the lower 0.4. The idea for steps: E. Brandt, "Hard sync without
//! aliasing", Proc. Int. Computer Music Conf., 2001 (recalled from memory).

use std::ops::{Add, Mul, Sub};
use std::sync::{Arc, OnceLock};

use num_complex::Complex64;

use super::fir::kaiser_beta;
use super::window::{bessel_i0, sinc};

/// Samples by which [`Responses::next`] lags behind the edges that must be known: half the kernel.
pub const EDGE_LATENCY: usize = HALF;

/// Up to this part of the sample rate the observer is flat and nothing folds.
pub const CLEAN_BAND: f64 = 0.4;

/// Kernel to each side, samples.
const HALF: usize = 16;

/// Folding below [`CLEAN_BAND`], dB.
const ATTENUATION_DB: f64 = 100.0;

/// Table rows a sample. Between rows the straight line is taken, wrong by at most `pi / 512^2 / 8`: -116 dB.
const ROWS: usize = 512;

/// Ring of samples that an edge can still reach: more than the kernel, a power of two.
const RING: usize = 64;

/// The observer's low-pass, of integral one within 1e-5; zero beyond [`HALF`].
pub(super) fn observer(u: f64) -> f64 {
    let part = u / HALF as f64;
    if part.abs() >= 1.0 {
        return 0.0;
    }
    let beta = kaiser_beta(ATTENUATION_DB);
    sinc(u) * bessel_i0(beta * (1.0 - part * part).sqrt()) / bessel_i0(beta)
}

/// Three-point Gauss-Legendre on 0..1: nodes and weights.
pub(super) const GAUSS: [(f64, f64); 3] = [
    (0.112_701_665_379_258_31, 5.0 / 18.0),
    (0.5, 8.0 / 18.0),
    (0.887_298_334_620_741_7, 5.0 / 18.0),
];

/// What a table holds: real for steps, complex for decays.
pub trait Response:
    Copy
    + Send
    + Sync
    + Mul<Complex64, Output = Complex64>
    + Mul<f64, Output = Self>
    + Add<Output = Self>
    + Sub<Output = Self>
{
}

impl Response for f64 {}
impl Response for Complex64 {}

/// The response of one pole, tabulated.
#[derive(Debug)]
struct Table<T> {
    /// Row `p` holds `E(i - HALF + 1 - p / ROWS)` for `i` from 0 to `2 HALF - 1`.
    rows: Vec<T>,
    /// `E(HALF)`.
    end: T,
}

impl<T: Response> Table<T> {
    /// `values[k]` is `E(k / ROWS - HALF)`.
    fn new(values: &[T]) -> Self {
        let mut rows = Vec::with_capacity((ROWS + 1) * 2 * HALF);
        for row in 0..=ROWS {
            for tap in 0..2 * HALF {
                rows.push(values[(tap + 1) * ROWS - row]);
            }
        }
        Self {
            rows,
            end: values[2 * HALF * ROWS],
        }
    }
}

/// `E` on the grid of rows.
fn tabulate(pole: Complex64) -> Vec<Complex64> {
    let points = 2 * HALF * ROWS;
    let step = 1.0 / ROWS as f64;
    let at = |index: usize| index as f64 * step - HALF as f64;
    // The kernel's own integral is one only to the depth of its stop band.
    let area: f64 = (0..points)
        .map(|index| {
            GAUSS
                .iter()
                .map(|(node, weight)| weight * step * observer(at(index) + node * step))
                .sum::<f64>()
        })
        .sum();
    if pole.norm() > ROWS as f64 {
        // Over before the next row: an impulse of the decay's area.
        return (0..=points)
            .map(|index| -observer(at(index)) / area / pole)
            .collect();
    }
    let decay = (pole * step).exp();
    let mut values = Vec::with_capacity(points + 1);
    let mut sum = Complex64::ZERO;
    values.push(sum);
    for index in 0..points {
        let gained: Complex64 = GAUSS
            .iter()
            .map(|(node, weight)| {
                (pole * (step * (1.0 - node))).exp()
                    * (weight * step * observer(at(index) + node * step) / area)
            })
            .sum();
        sum = sum * decay + gained;
        values.push(sum);
    }
    values
}

/// The responses of one pole to a stream of edges, sample by sample.
#[derive(Debug, Clone)]
pub struct Responses<T> {
    table: Arc<Table<T>>,
    pole: Complex64,
    decay: Complex64,
    /// What edges add to coming samples, and to what goes on behind the kernel.
    near: [Complex64; RING],
    far: [Complex64; RING],
    tail: Complex64,
    /// The sample that [`Responses::next`] gives.
    sample: i64,
}

impl Responses<f64> {
    /// Steps: every edge of size `a` changes the level by `a` for good.
    pub fn steps() -> Self {
        static TABLE: OnceLock<Arc<Table<f64>>> = OnceLock::new();
        let table = TABLE.get_or_init(|| {
            let values: Vec<f64> = tabulate(Complex64::ZERO).iter().map(|v| v.re).collect();
            Arc::new(Table::new(&values))
        });
        Self::with(Arc::clone(table), Complex64::ZERO, Complex64::ONE)
    }
}

impl Responses<Complex64> {
    /// Decays: every edge of size `a` starts `a exp(pole t)`. `pole` counts a sample, its real part is below 0.
    pub fn decays(pole: Complex64) -> Self {
        let table = Arc::new(Table::new(&tabulate(pole)));
        let decay = if pole.norm() > ROWS as f64 {
            Complex64::ZERO
        } else {
            pole.exp()
        };
        Self::with(table, pole, decay)
    }
}

impl<T: Response> Responses<T> {
    fn with(table: Arc<Table<T>>, pole: Complex64, decay: Complex64) -> Self {
        Self {
            table,
            pole,
            decay,
            near: [Complex64::ZERO; RING],
            far: [Complex64::ZERO; RING],
            tail: Complex64::ZERO,
            sample: 0,
        }
    }

    /// Starts with the level `amount`, as if an edge of that size lay long before.
    pub fn start(&mut self, amount: Complex64) {
        self.tail = amount;
    }

    /// An edge of size `amount` at sample `whole` plus `part` (0 to below 1). It must not lie more than the latency
    /// before the next sample, nor more than 30 samples behind it.
    pub fn edge(&mut self, whole: i64, part: f64, amount: Complex64) {
        let at = part * ROWS as f64;
        let row = (at as usize).min(ROWS - 1);
        let mix = at - row as f64;
        let width = 2 * HALF;
        let rows = &self.table.rows[row * width..(row + 2) * width];
        let (first, second) = rows.split_at(width);
        let from = whole - HALF as i64 + 1;
        for (tap, (&a, &b)) in first.iter().zip(second).enumerate() {
            let slot = (from + tap as i64) as usize & (RING - 1);
            self.near[slot] += (a + (b - a) * mix) * amount;
        }
        let behind = (whole + HALF as i64 + 1) as usize & (RING - 1);
        let left = if self.decay == Complex64::ZERO {
            Complex64::ZERO
        } else {
            (self.pole * (1.0 - part)).exp()
        };
        self.far[behind] += left * (self.table.end * amount);
    }

    /// The next sample, from 0. Every edge up to [`EDGE_LATENCY`] samples past it must have been given.
    pub fn advance(&mut self) -> Complex64 {
        let slot = self.sample as usize & (RING - 1);
        self.sample += 1;
        self.tail = self.tail * self.decay + std::mem::take(&mut self.far[slot]);
        self.tail + std::mem::take(&mut self.near[slot])
    }
}

/// What the observer sees of straight lines between samples: late by [`EDGE_LATENCY`].
#[derive(Debug, Clone)]
pub struct Straight {
    /// Symmetric: the middle first.
    taps: [f64; HALF + 2],
    /// The last inputs twice, so that the newest stand in a row.
    history: [Complex64; 4 * (HALF + 1)],
    at: usize,
}

impl Default for Straight {
    fn default() -> Self {
        let panels = 64;
        let step = 1.0 / f64::from(panels);
        let tap = |place: f64| -> f64 {
            (0..panels)
                .flat_map(|panel| {
                    GAUSS.map(|(node, weight)| ((f64::from(panel) + node) * step, weight))
                })
                .map(|(u, weight)| {
                    let hat = weight * step * (1.0 - u);
                    hat * (observer(place - u) + observer(place + u))
                })
                .sum()
        };
        let mut taps = [0.0; HALF + 2];
        for (place, entry) in taps.iter_mut().enumerate() {
            *entry = tap(place as f64);
        }
        let sum = taps[0] + 2.0 * taps[1..].iter().sum::<f64>();
        Self {
            taps: taps.map(|tap| tap / sum),
            history: [Complex64::ZERO; 4 * (HALF + 1)],
            at: 0,
        }
    }
}

impl Straight {
    /// The sample that stands [`EDGE_LATENCY`] before `input`.
    pub fn push(&mut self, input: Complex64) -> Complex64 {
        let width = 2 * (HALF + 1);
        self.history[self.at] = input;
        self.history[self.at + width] = input;
        self.at = (self.at + 1) % width;
        let window = &self.history[self.at..self.at + width];
        // The newest stands at width - 1, the middle HALF before it; the tap beyond the newest is 1e-8 and left out.
        let middle = width - 1 - HALF;
        let mut sum = window[middle] * self.taps[0];
        for place in 1..=HALF {
            sum += (window[middle - place] + window[middle + place]) * self.taps[place];
        }
        sum
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::TAU;

    /// Amplitudes of lines `k / period` of a rectangle train of that period (samples), duty `d`, over 4096 samples.
    fn train(period: f64, duty: f64, pole: Option<Complex64>) -> impl Fn(f64) -> Complex64 {
        let count = 4096i64;
        let periods = (count as f64 / period).round();
        let period = count as f64 / periods;
        let mut steps = Responses::steps();
        let mut decays = pole.map(Responses::decays);
        let lead = 4096i64;
        let mut samples = Vec::new();
        let mut edges: Vec<(f64, f64)> = Vec::new();
        for k in 0..(3.0 * periods) as i64 {
            edges.push((k as f64 * period + 0.123, 1.0));
            edges.push(((k as f64 + duty) * period + 0.123, -1.0));
        }
        let mut next = 0;
        for now in 0..(2 * count + lead + HALF as i64) {
            while let Some(&(time, size)) = edges.get(next).filter(|edge| edge.0 < (now + 1) as f64)
            {
                let (whole, part) = (time.floor(), time - time.floor());
                steps.edge(whole as i64, part, size.into());
                if let Some(decays) = &mut decays {
                    decays.edge(whole as i64, part, size.into());
                }
                next += 1;
            }
            if now + 1 >= HALF as i64 {
                let step = steps.advance();
                samples.push(match &mut decays {
                    Some(decays) => step - decays.advance(),
                    None => step,
                });
            }
        }
        // Sample 4096 + n; the first periods have died away.
        move |line: f64| {
            let sum: Complex64 = (0..count)
                .map(|n| {
                    let angle = TAU * (line * n as f64 / count as f64).fract();
                    samples[(lead + n) as usize] * Complex64::cis(-angle)
                })
                .sum();
            sum / count as f64
        }
    }

    #[test]
    fn a_pulse_train_shows_its_lines_and_nothing_folds() {
        for period in [37.3, 9.17, 3.3] {
            let periods = (4096.0f64 / period).round();
            let duty = 0.313;
            let line = train(period, duty, None);
            for bin in 0..(0.4 * 4096.0) as i64 {
                let order = bin as f64 / periods;
                let law = if bin == 0 {
                    duty
                } else if order.fract() == 0.0 {
                    (std::f64::consts::PI * order * duty).sin().abs()
                        / (std::f64::consts::PI * order)
                } else {
                    0.0
                };
                let got = line(bin as f64).norm();
                // A hundred dB below the jump's own line at its place: 1e-5 / pi of a jump each, and 1e-5 of the
                // observer's ripple.
                assert!((got - law).abs() < 1e-5, "{period} {bin}: {got:e} {law:e}");
            }
        }
    }

    #[test]
    fn straight_lines_lose_what_their_spectrum_says() {
        // A tone joined by straight lines: sinc^2 of its frequency, its images beyond 0.6 removed.
        for cycles in [0.0, 0.05, 0.2, 0.39] {
            let mut straight = Straight::default();
            let tone = |n: f64| Complex64::cis(TAU * cycles * n);
            let mut last = Complex64::ZERO;
            for n in 0..200 {
                last = straight.push(tone(f64::from(n)));
            }
            let got = last / tone(199.0 - EDGE_LATENCY as f64);
            let law = sinc(cycles).powi(2);
            assert!((got - law).norm() < 2e-5, "{cycles}: {got} {law}");
        }
    }

    #[test]
    fn decays_have_the_response_of_their_pole() {
        // 1 - exp(pole t) behind every edge: line k falls by -pole / (j w - pole).
        for pole in [
            Complex64::new(-0.05, 0.02),
            Complex64::new(-1.3, 0.9),
            Complex64::new(-40.0, 0.0),
            Complex64::new(-900.0, 0.0),
        ] {
            let periods = 211.0;
            let duty = 0.4;
            let line = train(4096.0 / periods, duty, Some(pole));
            for order in 1..8 {
                let bin = periods * f64::from(order);
                let w = Complex64::new(0.0, TAU * bin / 4096.0);
                let order = f64::from(order);
                let plain =
                    (std::f64::consts::PI * order * duty).sin() / (std::f64::consts::PI * order);
                let law = plain.abs() * (-pole / (w - pole)).norm();
                let got = line(bin).norm();
                assert!((got - law).abs() < 1e-5, "{pole} {order}: {got} {law}");
            }
        }
    }
}
