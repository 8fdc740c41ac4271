//! Where the drain crosses the diode's corner: found in the dense output, then by steps that end on it.

use super::device::{Side, Throw};
use super::engine::Engine;
use super::period::{Scales, Stop};
use super::step::{Solved, Start, Step};
use crate::math::radau::{RADAU, STAGES, evaluate};

impl Engine {
    /// Where in a step (0..1) the drain first leaves its side of the diode's corner.
    pub(super) fn crossing(
        &self,
        start: f64,
        values: &[f64; STAGES],
        side: Side,
        scale_v: f64,
    ) -> Option<f64> {
        let corner = self.device.corner()?;
        let sign = match side {
            Side::Above => 1.0,
            Side::Below => -1.0,
        };
        let (low, high) = values
            .iter()
            .fold((start, start), |(l, h), &v| (l.min(v), h.max(v)));
        let nearest = match side {
            Side::Above => low - corner,
            Side::Below => corner - high,
        };
        if nearest > 0.3 * (high - low) {
            return None;
        }
        let margin = 1e-11 * scale_v;
        let poly = RADAU.polynomial(start, values);
        let beyond = |theta: f64| sign * (evaluate(start, &poly, theta).0 - corner);
        const PARTS: usize = 20;
        let mut before = 0.0;
        for part in 1..=PARTS {
            let theta = part as f64 / PARTS as f64;
            if beyond(theta) < -margin {
                let (mut low, mut high) = (before, theta);
                if beyond(low) <= 0.0 {
                    return Some(low);
                }
                for _ in 0..60 {
                    let middle = 0.5 * (low + high);
                    if beyond(middle) > 0.0 {
                        low = middle;
                    } else {
                        high = middle;
                    }
                }
                return Some(0.5 * (low + high));
            }
            before = theta;
        }
        None
    }

    /// The step that ends on the diode's corner, near `length` and no longer than `longest`.
    #[expect(clippy::too_many_arguments, reason = "one call, all of it needed")]
    pub(super) fn locate(
        &mut self,
        begin: &Start<'_>,
        throw: Throw,
        side: Side,
        length: f64,
        longest: f64,
        whole: &Solved,
        scales: &Scales,
    ) -> Result<(Step, Solved), Stop> {
        let corner = self.device.corner().unwrap_or(0.0);
        let radau = &*RADAU;
        let mut length = length;
        let poly = radau.polynomial(begin.v, &whole.v);
        let mut guess = radau
            .nodes
            .map(|c| evaluate(begin.v, &poly, c * length / longest).0);
        let mut attempt = 0;
        loop {
            let step = self.fresh(length).ok_or(Stop::NoStep)?;
            let solved = step
                .solve(
                    begin,
                    &guess,
                    scales.v,
                    |v| self.charge(v),
                    |v| self.current(throw, side, v),
                )
                .ok_or(Stop::NoStep)?;
            let miss = solved.v[STAGES - 1] - corner;
            let poly = radau.polynomial(begin.v, &solved.v);
            let slope = evaluate(begin.v, &poly, 1.0).1 / length;
            let next = length - miss / slope;
            attempt += 1;
            let usable = next > 0.0 && next < 1.5 * longest;
            if miss.abs() <= 1e-11 * scales.v || attempt >= 5 || !usable {
                return Ok((step, solved));
            }
            guess = solved.v;
            length = next;
        }
    }
}
