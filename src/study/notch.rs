//! The stretch of time around the deepest notch of the signal, found while it passes.

use std::collections::VecDeque;

use super::result::Notch;

/// One instant of a track.
#[derive(Debug, Clone, Copy)]
pub(super) struct NotchInstant {
    /// Magnitude of the wanted signal, squared.
    pub wanted_square: f64,
    pub asked: f64,
    pub control: f64,
}

/// Keeps what lies `reach` instants to each side of the lowest one so far.
#[derive(Debug)]
pub(super) struct NotchFinder {
    reach: usize,
    /// The last instants, `reach` at most.
    before: VecDeque<NotchInstant>,
    lowest: f64,
    window: Vec<NotchInstant>,
    /// Place of the lowest one in the window.
    middle: usize,
}

impl NotchFinder {
    pub fn new(reach: usize) -> Self {
        Self {
            reach,
            before: VecDeque::with_capacity(reach + 1),
            lowest: f64::INFINITY,
            window: Vec::new(),
            middle: 0,
        }
    }

    pub fn push(&mut self, instant: NotchInstant) {
        if instant.wanted_square < self.lowest {
            self.lowest = instant.wanted_square;
            self.window.clear();
            self.window.extend(&self.before);
            self.middle = self.window.len();
            self.window.push(instant);
        } else if !self.window.is_empty() && self.window.len() <= self.middle + self.reach {
            self.window.push(instant);
        }
        if self.before.len() == self.reach {
            self.before.pop_front();
        }
        self.before.push_back(instant);
    }

    /// Magnitudes times `level`, controls as parts of `full`; empty where nothing passed.
    pub fn finish(&self, rate_hz: f64, level: f64, full: f64) -> Notch {
        let mut notch = Notch::default();
        for (at, instant) in self.window.iter().enumerate() {
            notch
                .time_s
                .push((at as f64 - self.middle as f64) / rate_hz);
            notch.wanted.push(level * instant.wanted_square.sqrt());
            notch.asked.push(instant.asked / full);
            notch.control.push(instant.control / full);
        }
        notch
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn window_of(squares: &[f64], reach: usize) -> Notch {
        let mut finder = NotchFinder::new(reach);
        for &wanted_square in squares {
            finder.push(NotchInstant {
                wanted_square,
                asked: 2.0 * wanted_square,
                control: 3.0 * wanted_square,
            });
        }
        finder.finish(10.0, 0.5, 2.0)
    }

    #[test]
    fn the_lowest_instant_stands_in_the_middle() {
        let notch = window_of(&[9.0, 4.0, 16.0, 25.0, 1.0, 36.0, 49.0, 64.0], 2);
        assert_eq!(notch.time_s, [-0.2, -0.1, 0.0, 0.1, 0.2]);
        assert_eq!(notch.wanted, [2.0, 2.5, 0.5, 3.0, 3.5]);
        assert_eq!(notch.asked, [16.0, 25.0, 1.0, 36.0, 49.0]);
        assert_eq!(notch.control, [24.0, 37.5, 1.5, 54.0, 73.5]);
    }

    #[test]
    fn a_notch_at_an_end_has_one_side() {
        assert_eq!(window_of(&[4.0, 9.0, 1.0], 2).time_s, [-0.2, -0.1, 0.0]);
        assert_eq!(window_of(&[1.0, 9.0, 4.0, 16.0], 2).time_s, [0.0, 0.1, 0.2]);
        assert!(window_of(&[], 2).time_s.is_empty());
    }
}
