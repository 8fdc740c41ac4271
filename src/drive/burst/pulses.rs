//! From the magnitude to edges at exact times.
//!
//! With `L` levels the part `M = m (L - 1)` is held against `L - 1` ramps stacked on each other (`c`, `c + 1`, ...): the
//! gate stands at `#{j: j < M - c}`. Between instants the magnitude is the cubic through four of them; crossings are
//! found by the method of false position (Illinois variant).

use super::{BurstScheme, MovedEdges, Sampling, Updates};

/// An error that noise shaping can no longer hold, in steps, for the first and the second order: it is cut there.
const OVERLOAD: [f64; 2] = [1.0, 4.0];

/// Parts of an instant in which crossings are looked for.
const PARTS: usize = 4;

/// The modulator at work. Times are in samples of the magnitude's stream.
#[derive(Debug, Clone)]
pub(super) struct Pulses {
    sampling: Sampling,
    edges: MovedEdges,
    updates: Updates,
    order: u32,
    /// Levels less one.
    span: f64,
    /// When the first period starts.
    origin: f64,
    /// From one turn of the ramp, or tick of the clock, to the next.
    step: f64,
    /// The next turn or tick.
    next: u64,
    held: f64,
    level: f64,
    errors: [f64; 2],
    overloads: u64,
}

impl Pulses {
    /// The modulator of `scheme` at `rate_hz`, whose first period starts at `origin`.
    pub(super) fn new(scheme: &BurstScheme, origin: f64, rate_hz: f64) -> Self {
        let period = rate_hz / scheme.rate_hz;
        let turns = match (scheme.sampling, scheme.edges) {
            (Sampling::Shaped, _) | (_, MovedEdges::One) => 1.0,
            (_, MovedEdges::Two) => 2.0,
        };
        Self {
            sampling: scheme.sampling,
            edges: scheme.edges,
            updates: scheme.updates,
            order: scheme.order,
            span: f64::from(scheme.levels - 1),
            origin,
            step: period / turns,
            next: 0,
            held: 0.0,
            level: 0.0,
            errors: [0.0; 2],
            overloads: 0,
        }
    }

    /// Ticks at which the shaped error had to be cut.
    pub(super) fn overloads(&self) -> u64 {
        self.overloads
    }

    /// Goes from instant `k` to the next. `m` is the magnitude at `k - 1`, `k`, `k + 1` and `k + 2`; `emit` gets the time
    /// of every edge and the gate's new level, 0 to 1.
    pub(super) fn advance(&mut self, k: i64, m: &[f64; 4], emit: &mut impl FnMut(f64, f64)) {
        let (mut from, end) = (k as f64, (k + 1) as f64);
        loop {
            let turn = self.origin + self.next as f64 * self.step;
            let to = turn.min(end);
            if to > from {
                self.stretch(k, [from, to], m, emit);
                from = to;
            }
            if turn >= end {
                break;
            }
            self.turn(turn, k, m, emit);
            self.next += 1;
        }
    }

    fn set(&mut self, time: f64, level: f64, emit: &mut impl FnMut(f64, f64)) {
        if level != self.level {
            self.level = level;
            emit(time, level / self.span);
        }
    }

    /// The magnitude in steps at time `t`, from the four values around.
    fn wanted(&self, t: f64, k: i64, m: &[f64; 4]) -> f64 {
        let s = t - k as f64;
        let (below, above, far) = (s + 1.0, s - 1.0, s - 2.0);
        let cubic = -m[0] * s * above * far / 6.0 + m[1] * below * above * far / 2.0
            - m[2] * below * s * far / 2.0
            + m[3] * below * s * above / 6.0;
        self.span * cubic.clamp(0.0, 1.0)
    }

    /// How far the magnitude stands above the ramp that runs from the last turn to the next.
    fn above(&self, t: f64, k: i64, m: &[f64; 4]) -> f64 {
        let wanted = match self.sampling {
            Sampling::Natural => self.wanted(t, k, m),
            _ => self.held,
        };
        // Never on and always on have no edge at the ramp's ends.
        if wanted <= 0.0 || self.next == 0 {
            return -1.0;
        }
        if wanted >= self.span {
            return self.span;
        }
        let part = (t - self.origin) / self.step - (self.next - 1) as f64;
        let falls = self.edges == MovedEdges::Two && self.next % 2 == 1;
        wanted - if falls { 1.0 - part } else { part }
    }

    /// Levels below `above`.
    fn count(&self, above: f64) -> f64 {
        above.ceil().clamp(0.0, self.span)
    }

    /// A turn of the ramp, or a tick.
    fn turn(&mut self, time: f64, k: i64, m: &[f64; 4], emit: &mut impl FnMut(f64, f64)) {
        if self.sampling == Sampling::Shaped {
            let level = self.shaped(self.wanted(time, k, m));
            return self.set(time, level, emit);
        }
        let twice = self.updates == Updates::Twice || self.edges == MovedEdges::One;
        if twice || self.next.is_multiple_of(2) {
            self.held = self.wanted(time, k, m);
        }
        self.next += 1;
        let level = self.count(self.above(time, k, m));
        self.next -= 1;
        self.set(time, level, emit);
    }

    /// The level at a tick, with the errors of earlier ones fed back.
    fn shaped(&mut self, wanted: f64) -> f64 {
        let [last, before] = self.errors;
        let fed = match self.order {
            1 => wanted + last,
            _ => wanted + 2.0 * last - before,
        };
        let level = fed.round().clamp(0.0, self.span);
        let limit = OVERLOAD[usize::from(self.order != 1)];
        let error = fed - level;
        self.overloads += u64::from(error.abs() > limit);
        self.errors = [error.clamp(-limit, limit), last];
        level
    }

    /// The ramp runs straight from `from` to `to`.
    fn stretch(
        &mut self,
        k: i64,
        [from, to]: [f64; 2],
        m: &[f64; 4],
        emit: &mut impl FnMut(f64, f64),
    ) {
        if self.sampling == Sampling::Shaped {
            return;
        }
        let mut left = (from, self.above(from, k, m));
        for part in 1..=PARTS {
            let t = from + (to - from) * part as f64 / PARTS as f64;
            let right = (t, self.above(t, k, m));
            let target = self.count(right.1);
            while self.level != target {
                // Upwards past the level itself, downwards past the one below.
                let (step, height) = if target > self.level {
                    (1.0, self.level)
                } else {
                    (-1.0, self.level - 1.0)
                };
                let time = self.crossing(left, right, height, k, m);
                self.set(time, self.level + step, emit);
            }
            left = right;
        }
    }

    /// Where the magnitude stands `height` above the ramp, between two times on its two sides.
    fn crossing(
        &self,
        left: (f64, f64),
        right: (f64, f64),
        height: f64,
        k: i64,
        m: &[f64; 4],
    ) -> f64 {
        let (mut a, mut fa) = (left.0, left.1 - height);
        let (mut b, mut fb) = (right.0, right.1 - height);
        let mut best = if fa.abs() < fb.abs() {
            (a, fa)
        } else {
            (b, fb)
        };
        let mut side = 0;
        for _ in 0..60 {
            if fa == fb || best.1.abs() < 1e-12 {
                break;
            }
            let t = ((a * fb - b * fa) / (fb - fa)).clamp(a, b);
            let f = self.above(t, k, m) - height;
            if f.abs() < best.1.abs() {
                best = (t, f);
            }
            // The end that stays twice counts half.
            if (f > 0.0) == (fb > 0.0) {
                (b, fb) = (t, f);
                if side == 1 {
                    fa *= 0.5;
                }
                side = 1;
            } else {
                (a, fa) = (t, f);
                if side == -1 {
                    fb *= 0.5;
                }
                side = -1;
            }
        }
        best.0
    }
}
