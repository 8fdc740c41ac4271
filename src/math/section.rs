//! One section of a filter on a sampled signal that stands for a continuous one.
//!
//! ```text
//! w' = A w + b u,   y = c w + d u
//! ```
//! exact for an input that runs straight between samples (ramp-invariant).

use std::ops::{AddAssign, Mul};

use super::flow::Flow;
use super::small::Square;

/// How a section's output is made of its state and its input.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Output {
    /// Of the two states.
    pub state: [f64; 2],
    /// Of the input.
    pub through: f64,
}

impl Output {
    /// The first state itself.
    pub(super) const FIRST: Self = Self {
        state: [1.0, 0.0],
        through: 0.0,
    };
}

/// Two states, or one and an idle one.
#[derive(Debug, Clone)]
pub(super) struct Section<T> {
    /// State to state.
    step: [[f64; 2]; 2],
    /// Input at the start and at the end of the step to the state.
    start: [f64; 2],
    end: [f64; 2],
    output: Output,
    state: [T; 2],
    last: T,
}

impl<T> Section<T>
where
    T: Copy + Default + AddAssign + Mul<f64, Output = T>,
{
    /// `a` and `b` in the unit of time of which `step` pass from sample to sample; at rest.
    pub(super) fn new(a: [[f64; 2]; 2], b: [f64; 2], output: Output, step: f64) -> Self {
        // Input u and its slope v (u' = v) as two more states: exp gives the response to steps and ramps.
        let generator = Square([
            [a[0][0], a[0][1], b[0], 0.0],
            [a[1][0], a[1][1], b[1], 0.0],
            [0.0, 0.0, 0.0, 1.0],
            [0.0, 0.0, 0.0, 0.0],
        ]);
        let flow = Flow::new(&generator, step, 0);
        let d = &flow.difference().0;
        let ramp = [d[0][3] / step, d[1][3] / step];
        Self {
            step: [[1.0 + d[0][0], d[0][1]], [d[1][0], 1.0 + d[1][1]]],
            start: [d[0][2] - ramp[0], d[1][2] - ramp[1]],
            end: ramp,
            output,
            state: [T::default(); 2],
            last: T::default(),
        }
    }

    /// Starts from the state `settled` times `value`, in which the constant input `value` leaves it.
    pub(super) fn settle(&mut self, value: T, settled: [f64; 2]) {
        self.state = settled.map(|part| value * part);
        self.last = value;
    }

    /// Takes the input as constant from the last sample to the next one.
    pub(super) fn hold(&mut self, value: T) {
        self.last = value;
    }

    /// The output at the instant of `input`.
    pub(super) fn push(&mut self, input: T) -> T {
        let mut next = [T::default(); 2];
        for (i, entry) in next.iter_mut().enumerate() {
            *entry += self.state[0] * self.step[i][0];
            *entry += self.state[1] * self.step[i][1];
            *entry += self.last * self.start[i];
            *entry += input * self.end[i];
        }
        self.state = next;
        self.last = input;
        if self.output == Output::FIRST {
            return self.state[0];
        }
        let mut output = input * self.output.through;
        output += self.state[0] * self.output.state[0];
        output += self.state[1] * self.output.state[1];
        output
    }
}
