//! Exact propagation of a linear system over an interval and all its binary fractions.
//!
//! For `dz/dt = A z` the propagator over `h` is `exp(A h) = I + D(h)`. Keeping `D` instead of the
//! exponential itself keeps slow modes exact when a fast one forces a tiny first step:
//!
//! ```text
//! D(2h) = 2 D(h) + D(h)^2
//! P(2h) = 2 P + D P + (D P)^T + D P D^T,   P(h) = integral of z z^T from 0 to h
//! ```
//!
//! The first step is a Taylor series with `|A h| <= 1/2` in the 1-norm. Scaling and squaring as in
//! C. Moler, C. Van Loan, "Nineteen dubious ways to compute the exponential of a matrix,
//! twenty-five years later", SIAM Review 45 (2003), method 3; the difference form is the matrix
//! analogue of `expm1`.

use super::small::{Column, Square, dot};

/// Terms of the Taylor series: the first dropped one is below `0.5^17 / 17! < 1e-19`.
const TERMS: usize = 16;

/// The most halvings of the interval: with more, the first step would lose the slow modes anyhow.
const MAX_LEVELS: usize = 60;

/// Each halving of the first grid step is walked in two to this power parts: within one of them an exponential
/// of any rate changes by a part of itself.
const SPLITS_OF_A_HALVING: usize = 2;

/// Propagators over `length / 2^k` for `k = 0..levels`.
#[derive(Debug, Clone)]
pub struct Flow<const N: usize> {
    generator: Square<N>,
    length: f64,
    /// `differences[k] = exp(A length / 2^k) - I`.
    differences: Vec<Square<N>>,
}

impl<const N: usize> Flow<N> {
    /// Propagators of `generator` over `length` and at least `levels` halvings of it.
    pub fn new(generator: &Square<N>, length: f64, levels: usize) -> Self {
        let norm = generator.norm_1() * length;
        let needed = if norm > 0.5 {
            (2.0 * norm).log2().ceil() as usize
        } else {
            0
        };
        let halvings = needed.max(levels).min(MAX_LEVELS);
        let step = length * 0.5f64.powi(halvings as i32);
        let scaled = generator.scaled(step);
        // Horner: D = s (I + s/2 (I + s/3 (...))).
        let mut series = Square::identity();
        for term in (2..=TERMS).rev() {
            let mut next = scaled.times(&series).scaled(1.0 / term as f64);
            for (i, row) in next.0.iter_mut().enumerate() {
                row[i] += 1.0;
            }
            series = next;
        }
        let mut difference = scaled.times(&series);
        let mut differences = Vec::with_capacity(halvings + 1);
        differences.push(difference);
        for _ in 0..halvings {
            let mut doubled = difference.times(&difference);
            doubled.add_scaled(2.0, &difference);
            difference = doubled;
            differences.push(difference);
        }
        differences.reverse();
        Self {
            generator: *generator,
            length,
            differences,
        }
    }

    /// The interval's length.
    pub fn length(&self) -> f64 {
        self.length
    }

    /// `exp(A length) - I`.
    pub fn difference(&self) -> &Square<N> {
        &self.differences[0]
    }

    /// The state after the whole interval.
    pub fn end(&self, start: &Column<N>) -> Column<N> {
        self.step(0, start)
    }

    /// The state after `length / 2^level`.
    pub fn step(&self, level: usize, start: &Column<N>) -> Column<N> {
        let mut end = self.differences[level].apply(start);
        for (end, start) in end.iter_mut().zip(start) {
            *end += start;
        }
        end
    }

    /// How often the interval was halved.
    pub fn levels(&self) -> usize {
        self.differences.len() - 1
    }

    /// The integral of `z z^T` over the interval, from `start`.
    pub fn second_moment(&self, start: &Column<N>) -> Square<N> {
        let levels = self.levels();
        let step = self.length * 0.5f64.powi(levels as i32);
        let mut moment = self.first_moment_step(step, start);
        for difference in self.differences[1..].iter().rev() {
            let left = difference.times(&moment);
            let mut doubled = left.times_transposed(difference);
            doubled.add_scaled(2.0, &moment);
            doubled.add_scaled(1.0, &left);
            doubled.add_scaled(1.0, &left.transposed());
            moment = doubled;
        }
        moment
    }

    /// The integral of `z z^T` over the first step, by Gauss-Legendre quadrature with eight nodes: exact
    /// for polynomials of degree 15, and the integrand's Taylor terms past that are below 1e-15.
    fn first_moment_step(&self, step: f64, start: &Column<N>) -> Square<N> {
        let mut derivatives = [[0.0; N]; TERMS];
        derivatives[0] = *start;
        for term in 1..TERMS {
            derivatives[term] = self.generator.apply(&derivatives[term - 1]);
            for entry in &mut derivatives[term] {
                *entry *= step / term as f64;
            }
        }
        let mut moment = Square::ZERO;
        for (node, weight) in GAUSS_8 {
            for at in [0.5 - 0.5 * node, 0.5 + 0.5 * node] {
                let mut state = derivatives[TERMS - 1];
                for coefficients in derivatives[..TERMS - 1].iter().rev() {
                    for (entry, coefficient) in state.iter_mut().zip(coefficients) {
                        *entry = *entry * at + coefficient;
                    }
                }
                let weight = 0.5 * weight * step;
                for i in 0..N {
                    for j in 0..N {
                        moment.0[i][j] += weight * state[i] * state[j];
                    }
                }
            }
        }
        moment
    }

    /// Every extremum of `probe . z` over the interval, its ends included, as (time, value).
    ///
    /// The interval is walked in `2^grid_level` steps, the first of them in ever finer ones towards its start,
    /// where what was switched dies away at rates that no oscillation tells of. Where the slope changes sign
    /// within a step, the place is found by bisection over the finer propagators and then by Newton on the
    /// Taylor series: to rounding, not to the grid. Two turns within one step would be missed: choose
    /// `grid_level` from the fastest oscillation.
    pub fn extrema(
        &self,
        start: &Column<N>,
        probe: &Column<N>,
        grid_level: usize,
        mut found: impl FnMut(f64, f64),
    ) {
        let slope = self.generator.transposed().apply(probe);
        let (level, finest) = (grid_level.min(self.levels()), self.levels());
        let mut state = *start;
        let mut slope_here = dot(&slope, &state);
        let mut time = 0.0;
        found(0.0, dot(probe, &state));
        let mut walk = |level: usize, steps: usize| {
            let step = self.length * 0.5f64.powi(level as i32);
            for _ in 0..steps {
                let next = self.step(level, &state);
                let slope_next = dot(&slope, &next);
                if slope_here * slope_next < 0.0 {
                    let (within, turned) = self.turn(level, &state, &slope, slope_here);
                    found(time + within, dot(probe, &turned));
                }
                state = next;
                slope_here = slope_next;
                time += step;
            }
        };
        // From 0 to the finest step, then from each halving of the first grid step to the one before it.
        walk(finest, 1);
        for halving in (level + 1..=finest).rev() {
            let finer = finest.min(halving + SPLITS_OF_A_HALVING);
            walk(finer, 1 << (finer - halving));
        }
        walk(level, (1 << level) - 1);
        found(self.length, dot(probe, &state));
    }

    /// Where the slope vanishes within a step of `level` that starts at `state`.
    fn turn(
        &self,
        level: usize,
        state: &Column<N>,
        slope: &Column<N>,
        slope_at_start: f64,
    ) -> (f64, Column<N>) {
        let mut state = *state;
        let mut time = 0.0;
        for finer in level + 1..=self.levels() {
            let middle = self.step(finer, &state);
            if dot(slope, &middle) * slope_at_start > 0.0 {
                state = middle;
                time += self.length * 0.5f64.powi(finer as i32);
            }
        }
        let step = self.length * 0.5f64.powi(self.levels() as i32);
        let mut series = [0.0; TERMS];
        let mut derivatives = [[0.0; N]; TERMS];
        derivatives[0] = state;
        series[0] = dot(slope, &state);
        for term in 1..TERMS {
            derivatives[term] = self.generator.apply(&derivatives[term - 1]);
            for entry in &mut derivatives[term] {
                *entry *= step / term as f64;
            }
            series[term] = dot(slope, &derivatives[term]);
        }
        let at = zero_within_unit(&series);
        let mut turned = derivatives[TERMS - 1];
        for coefficients in derivatives[..TERMS - 1].iter().rev() {
            for (entry, coefficient) in turned.iter_mut().zip(coefficients) {
                *entry = *entry * at + coefficient;
            }
        }
        (time + at * step, turned)
    }
}

/// The zero of a polynomial (lowest power first) in 0..1 where it changes sign there: Newton, held in the
/// bracket by bisection.
fn zero_within_unit(series: &[f64]) -> f64 {
    let evaluate = |x: f64| {
        series
            .iter()
            .rev()
            .fold((0.0, 0.0), |(value, slope), coefficient| {
                (value * x + coefficient, slope * x + value)
            })
    };
    let (mut low, mut high) = (0.0, 1.0);
    let sign = evaluate(0.0).0.signum();
    let mut x = 0.5;
    for _ in 0..60 {
        let (value, slope) = evaluate(x);
        if value == 0.0 {
            break;
        }
        if value.signum() == sign {
            low = x;
        } else {
            high = x;
        }
        let newton = x - value / slope;
        let next = if newton > low && newton < high {
            newton
        } else {
            0.5 * (low + high)
        };
        if (next - x).abs() < 1e-15 {
            break;
        }
        x = next;
    }
    x
}

/// Positive nodes and weights of the eight-point Gauss-Legendre rule on -1..1.
/// M. Abramowitz, I. A. Stegun, "Handbook of Mathematical Functions", table 25.4 (recalled from
/// memory; the test integrates every power up to 15).
const GAUSS_8: [(f64, f64); 4] = [
    (0.183_434_642_495_649_8, 0.362_683_783_378_362),
    (0.525_532_409_916_329, 0.313_706_645_877_887_3),
    (0.796_666_477_413_626_7, 0.222_381_034_453_374_48),
    (0.960_289_856_497_536_3, 0.101_228_536_290_376_26),
];

#[cfg(test)]
mod tests {
    use super::*;

    /// A decaying oscillator with a constant: `x'' + 2 x' + 101 x = 101`, states (x, x'/10, 1).
    fn oscillator() -> Square<3> {
        Square([[0.0, 10.0, 0.0], [-10.1, -2.0, 10.1], [0.0, 0.0, 0.0]])
    }

    #[test]
    fn quadrature_integrates_powers_to_15() {
        for power in 0..16 {
            let sum: f64 = GAUSS_8
                .iter()
                .flat_map(|(node, weight)| [(0.5 - 0.5 * node, weight), (0.5 + 0.5 * node, weight)])
                .map(|(x, weight)| 0.5 * weight * x.powi(power))
                .sum();
            assert!(
                (sum - 1.0 / (power + 1) as f64).abs() < 2e-15,
                "power {power}: {sum}"
            );
        }
    }

    #[test]
    fn matches_the_closed_form_of_a_damped_oscillator() {
        // From rest: x = 1 - e^-t (cos 10 t + sin(10 t)/10).
        let flow = Flow::new(&oscillator(), 0.7, 0);
        let end = flow.end(&[0.0, 0.0, 1.0]);
        let expected = 1.0 - (-0.7f64).exp() * (7f64.cos() + 7f64.sin() / 10.0);
        assert!((end[0] - expected).abs() < 1e-14, "{} {expected}", end[0]);
    }

    #[test]
    fn slow_modes_survive_a_fast_one() {
        // Rates 1e10 and 1 side by side: plain squaring would keep some seven digits of the slow one.
        let flow = Flow::new(&Square([[-1e10, 0.0], [0.0, -1.0]]), 1.0, 0);
        let end = flow.end(&[1.0, 1.0]);
        assert!(end[0].abs() < 1e-300 + 1e-15);
        assert!((end[1] / (-1f64).exp() - 1.0).abs() < 1e-13, "{}", end[1]);
    }

    #[test]
    fn moments_match_the_closed_form() {
        // z = (e^-2t, 1): integral of e^-4t and e^-2t.
        let flow = Flow::new(&Square([[-2.0, 0.0], [0.0, 0.0]]), 3.0, 0);
        let moment = flow.second_moment(&[1.0, 1.0]);
        assert!((moment.0[0][0] - (1.0 - (-12f64).exp()) / 4.0).abs() < 1e-14);
        assert!((moment.0[0][1] - (1.0 - (-6f64).exp()) / 2.0).abs() < 1e-14);
        assert!((moment.0[1][1] - 3.0).abs() < 1e-14);
    }

    #[test]
    fn quick_turns_at_the_start_are_seen() {
        // e^-t - 2 e^-50t + e^-4000t: starts at 0, dips within 1/500, peaks near 0.1 and falls; a grid of 8 sees
        // none of the first two.
        let rates = [1.0, 50.0, 4000.0];
        let mut generator = Square::<3>::ZERO;
        for (i, rate) in rates.iter().enumerate() {
            generator.0[i][i] = -rate;
        }
        let flow = Flow::new(&generator, 3.0, 3);
        let probe = [1.0, -2.0, 1.0];
        let mut turns = Vec::new();
        flow.extrema(&[1.0, 1.0, 1.0], &probe, 3, |time, value| {
            turns.push((time, value))
        });
        let value = |t: f64| (-t).exp() - 2.0 * (-50.0 * t).exp() + (-4000.0 * t).exp();
        assert_eq!(turns.len(), 4, "{turns:?}");
        for (time, found) in &turns {
            assert!((value(*time) - found).abs() < 1e-12, "{time} {found}");
        }
        for i in 0..=300_000 {
            let sample = value(1e-5 * f64::from(i));
            assert!(sample <= turns[2].1 + 1e-12 && sample >= turns[1].1 - 1e-12);
        }
    }

    #[test]
    fn extrema_are_exact() {
        // The step response above turns first at t = pi/10 with value 1 + e^(-pi/10).
        let flow = Flow::new(&oscillator(), 0.5, 3);
        let mut peak = (0.0, f64::MIN);
        flow.extrema(&[0.0, 0.0, 1.0], &[1.0, 0.0, 0.0], 3, |time, value| {
            if value > peak.1 {
                peak = (time, value);
            }
        });
        let at = std::f64::consts::PI / 10.0;
        assert!(
            (peak.0 - at).abs() < 1e-13 && (peak.1 - 1.0 - (-at).exp()).abs() < 1e-14,
            "{peak:?}"
        );
    }
}
