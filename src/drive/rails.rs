//! The rails of `levels`: which one the wanted amplitude asks for, and when within an instant it changes.

/// Supplies among which the stage is switched, rising; the last one is the full supply.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Rails {
    /// Parts of the full supply.
    Parts(Vec<f64>),
    /// V.
    Volts(Vec<f64>),
}

impl Rails {
    /// As parts of `full_v`.
    pub fn parts(&self, full_v: f64) -> Vec<f64> {
        match self {
            Self::Parts(parts) => parts.clone(),
            Self::Volts(volts) => volts.iter().map(|volt| volt / full_v).collect(),
        }
    }
}

/// A change of the rail.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Change {
    /// When, as a part of the time from one instant to the next.
    pub at: f64,
    /// The rail from then on.
    pub rail: usize,
}

/// The decision with hysteresis: up at once, down past the hysteresis.
#[derive(Debug, Clone)]
pub(super) struct Decider {
    parts: Vec<f64>,
    hysteresis: f64,
    rail: usize,
}

impl Decider {
    /// On the highest rail.
    pub(super) fn new(parts: Vec<f64>, hysteresis: f64) -> Self {
        Self {
            rail: parts.len().saturating_sub(1),
            parts,
            hysteresis,
        }
    }

    /// The rail that constant `m`, a part of full output, settles on from above.
    pub(super) fn at_rest(parts: &[f64], m: f64) -> usize {
        let below = parts.iter().take_while(|part| **part < m).count();
        below.min(parts.len().saturating_sub(1))
    }

    /// The changes while the wanted part of full output runs straight from `from` to `to`, in order.
    pub(super) fn changes(&mut self, from: f64, to: f64, changes: &mut Vec<Change>) {
        changes.clear();
        let when = |threshold: f64| {
            let part = (threshold - from) / (to - from);
            // A threshold that was passed before counts at once.
            if part.is_finite() {
                part.clamp(0.0, 1.0)
            } else {
                0.0
            }
        };
        while self.rail + 1 < self.parts.len() && to > self.parts[self.rail] {
            let at = when(self.parts[self.rail]);
            self.rail += 1;
            changes.push(Change {
                at,
                rail: self.rail,
            });
        }
        while self.rail > 0 {
            let threshold = self.parts[self.rail - 1] * (1.0 - self.hysteresis);
            if to >= threshold {
                break;
            }
            let at = when(threshold);
            self.rail -= 1;
            changes.push(Change {
                at,
                rail: self.rail,
            });
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn changes_fall_where_the_line_crosses() {
        let mut decider = Decider::new(vec![0.25, 0.5, 1.0], 0.1);
        let mut changes = Vec::new();
        let mut of = |from: f64, to: f64| {
            decider.changes(from, to, &mut changes);
            changes.iter().map(|c| (c.at, c.rail)).collect::<Vec<_>>()
        };
        assert_eq!(of(0.9, 0.9), []);
        let down = of(0.9, 0.1);
        assert_eq!(down.len(), 2);
        // 0.45 and 0.225, a tenth below the rails.
        assert!((down[0].0 - 0.45 / 0.8).abs() < 1e-12 && down[0].1 == 1);
        assert!((down[1].0 - 0.675 / 0.8).abs() < 1e-12 && down[1].1 == 0);
        assert_eq!(of(0.1, 0.24), []);
        let up = of(0.24, 0.64);
        assert!((up[0].0 - 0.025).abs() < 1e-12 && (up[1].0 - 0.65).abs() < 1e-12);
        assert_eq!(Decider::at_rest(&[0.25, 0.5, 1.0], 0.25), 0);
        assert_eq!(Decider::at_rest(&[0.25, 0.5, 1.0], 0.26), 1);
        assert_eq!(Decider::at_rest(&[0.25, 0.5, 1.0], 2.0), 2);
    }
}
