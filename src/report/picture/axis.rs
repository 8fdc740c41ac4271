//! Axes: what range they span, where the round values are, and how those are written.

/// Values of larger magnitude are left out of pictures.
const LARGEST: f64 = 1e18;
/// Values of smaller magnitude are drawn as zero.
const SMALLEST: f64 = 1e-24;

/// `value` as a picture can show it; `None` where it is no number or out of reach.
pub(crate) fn usable(value: f64) -> Option<f64> {
    if !value.is_finite() || value.abs() > LARGEST {
        None
    } else if value.abs() < SMALLEST {
        Some(0.0)
    } else {
        Some(value)
    }
}

/// How values are spread along an axis.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Spread {
    /// Equal steps.
    Linear,
    /// Equal ratios; values at or below zero are not shown.
    Decades,
}

/// Whether the unit takes a prefix.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Prefix {
    /// k, M, m, u ... as the range asks for.
    Engineering,
    /// None: dB, percent, degrees.
    Plain,
}

/// What an axis measures, before its range is known.
#[derive(Debug, Clone)]
pub(crate) struct AxisSpec {
    pub(crate) label: String,
    pub(crate) unit: String,
    pub(crate) prefix: Prefix,
    pub(crate) spread: Spread,
    /// Fixed ends; otherwise the data decide.
    pub(crate) range: Option<(f64, f64)>,
    /// Ends beyond which data are cut off rather than shown.
    pub(crate) at_least: Option<f64>,
}

impl AxisSpec {
    /// An axis whose unit takes prefixes.
    pub(crate) fn engineering(label: impl Into<String>, unit: &str) -> Self {
        Self {
            label: label.into(),
            unit: unit.to_owned(),
            prefix: Prefix::Engineering,
            spread: Spread::Linear,
            range: None,
            at_least: None,
        }
    }

    /// An axis whose unit takes none.
    pub(crate) fn plain(label: impl Into<String>, unit: &str) -> Self {
        Self {
            prefix: Prefix::Plain,
            ..Self::engineering(label, unit)
        }
    }
}

/// An axis with its range.
#[derive(Debug, Clone)]
pub(crate) struct Axis {
    /// Label with its unit: `offset from the carrier, kHz`.
    pub(crate) title: String,
    pub(crate) low: f64,
    pub(crate) high: f64,
    spread: Spread,
    /// One of the shown unit, in SI.
    unit_size: f64,
}

/// A round value and its text.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Tick {
    pub(crate) value: f64,
    pub(crate) text: String,
}

impl Axis {
    /// The axis that shows `values`, with `reserve` of the range free beyond each end that is not fixed.
    pub(crate) fn fit(spec: &AxisSpec, values: impl Iterator<Item = f64>, reserve: f64) -> Self {
        let in_decades = spec.spread == Spread::Decades;
        let fixed = spec
            .range
            .and_then(|(low, high)| Some((usable(low)?, usable(high)?)))
            .filter(|(low, high)| low < high && !(in_decades && *low <= 0.0));
        let (mut low, mut high) = fixed.unwrap_or_else(|| {
            let mut low = f64::INFINITY;
            let mut high = f64::NEG_INFINITY;
            for value in values.filter_map(usable) {
                if !in_decades || value > 0.0 {
                    low = low.min(value);
                    high = high.max(value);
                }
            }
            if let Some(floor) = spec.at_least.and_then(usable) {
                low = low.max(floor);
                high = high.max(low);
            }
            (low, high)
        });
        if low > high || !low.is_finite() || !high.is_finite() {
            (low, high) = if in_decades { (0.1, 1.0) } else { (0.0, 1.0) };
        }
        if in_decades {
            low = 10f64.powf((low.log10() + 1e-9).floor());
            high = 10f64.powf((high.log10() - 1e-9).ceil()).max(low * 10.0);
        } else {
            let size = low.abs().max(high.abs());
            if high - low <= size * 1e-6 {
                let half = if size > 0.0 { size * 0.1 } else { 0.5 };
                (low, high) = (low - half, high + half);
            } else if fixed.is_none() {
                let extra = (high - low) * reserve;
                (low, high) = (low - extra, high + extra);
            }
        }
        let (symbol, unit_size) = match spec.prefix {
            Prefix::Plain => ("", 1.0),
            Prefix::Engineering => prefix_of(low.abs().max(high.abs())),
        };
        let unit = format!("{symbol}{}", spec.unit);
        let title = match (spec.label.is_empty(), unit.is_empty()) {
            (_, true) => spec.label.clone(),
            (true, false) => unit,
            (false, false) => format!("{}, {unit}", spec.label),
        };
        Self {
            title,
            low,
            high,
            spread: spec.spread,
            unit_size,
        }
    }

    /// Where `value` stands between the ends, 0 to 1 inside the range; `None` where it has no place.
    pub(crate) fn share(&self, value: f64) -> Option<f64> {
        let value = usable(value)?;
        let share = match self.spread {
            Spread::Linear => (value - self.low) / (self.high - self.low),
            Spread::Decades => {
                if value <= 0.0 {
                    return None;
                }
                (value / self.low).log10() / (self.high / self.low).log10()
            }
        };
        // Far outside is as good as just outside, and keeps pixels small.
        share.is_finite().then(|| share.clamp(-50.0, 50.0))
    }

    /// At most about `most` round values inside the range, lowest first.
    pub(crate) fn ticks(&self, most: usize) -> Vec<Tick> {
        let most = most.max(2);
        match self.spread {
            Spread::Linear => self.even_ticks(most),
            Spread::Decades => self.decade_ticks(most),
        }
    }

    fn even_ticks(&self, most: usize) -> Vec<Tick> {
        let (low, high) = (self.low / self.unit_size, self.high / self.unit_size);
        let step = round_step((high - low) / most as f64);
        let decimals = (-(step.log10() + 1e-9).floor()).max(0.0) as usize;
        // 2.5 needs one digit more than its decade says; steps here are 1, 2 or 5.
        let first = (low / step - 1e-9).ceil();
        (0..=most + 1)
            .map(|index| (first + index as f64) * step)
            .take_while(|value| *value <= high + step * 1e-9)
            .map(|value| {
                let text = format!("{value:.decimals$}");
                let is_zero = value.abs() < step * 1e-6;
                Tick {
                    value: value * self.unit_size,
                    text: if is_zero { "0".to_owned() } else { text },
                }
            })
            .collect()
    }

    fn decade_ticks(&self, most: usize) -> Vec<Tick> {
        let (first, last) = (
            self.low.log10().round() as i32,
            self.high.log10().round() as i32,
        );
        let step = ((last - first) as usize).div_ceil(most).max(1);
        (first..=last)
            .step_by(step)
            .map(|decade| Tick {
                value: 10f64.powi(decade),
                text: if (-4..=4).contains(&decade) {
                    let decimals = (-decade).max(0) as usize;
                    format!("{:.decimals$}", 10f64.powi(decade))
                } else {
                    format!("1e{decade}")
                },
            })
            .collect()
    }
}

/// The prefix that brings `magnitude` to 1 .. 1000, and its size.
fn prefix_of(magnitude: f64) -> (&'static str, f64) {
    const PREFIXES: [(&str, i32); 10] = [
        ("T", 12),
        ("G", 9),
        ("M", 6),
        ("k", 3),
        ("", 0),
        ("m", -3),
        ("u", -6),
        ("n", -9),
        ("p", -12),
        ("f", -15),
    ];
    for (symbol, power) in PREFIXES {
        let size = 10f64.powi(power);
        if magnitude >= size * 0.9999 {
            return (symbol, size);
        }
    }
    ("", 1.0)
}

/// The next of 1, 2, 5 times a power of ten at or above `step`.
fn round_step(step: f64) -> f64 {
    let decade = 10f64.powf(step.log10().floor());
    let mantissa = step / decade;
    let factor = [1.0, 2.0, 5.0]
        .into_iter()
        .find(|factor| mantissa <= factor * (1.0 + 1e-9))
        .unwrap_or(10.0);
    factor * decade
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn texts(axis: &Axis, most: usize) -> Vec<String> {
        axis.ticks(most).into_iter().map(|tick| tick.text).collect()
    }

    #[test]
    fn offsets_read_in_kilohertz() {
        let spec = AxisSpec::engineering("offset from the carrier", "Hz");
        let axis = Axis::fit(&spec, [-25_000.0, 25_000.0].into_iter(), 0.0);
        assert_eq!(axis.title, "offset from the carrier, kHz");
        assert_eq!(texts(&axis, 6), ["-20", "-10", "0", "10", "20"]);
    }

    #[test]
    fn short_times_read_in_nanoseconds() {
        let spec = AxisSpec::engineering("time", "s");
        let axis = Axis::fit(&spec, [0.0, 5.9e-9].into_iter(), 0.0);
        assert_eq!(axis.title, "time, ns");
        assert_eq!(texts(&axis, 6), ["0", "1", "2", "3", "4", "5"]);
    }

    #[test]
    fn decades_are_written_out() {
        let mut spec = AxisSpec::plain("share of time above", "%");
        spec.spread = Spread::Decades;
        let axis = Axis::fit(&spec, [0.0, 0.002, 80.0].into_iter(), 0.0);
        assert_eq!(texts(&axis, 8), ["0.001", "0.01", "0.1", "1", "10", "100"]);
        assert_eq!(axis.share(0.0), None);
        assert!((axis.share(100.0).unwrap() - 1.0).abs() < 1e-12);
    }

    proptest! {
        #[test]
        fn any_data_give_few_distinct_ticks_inside(
            values in prop::collection::vec(prop::num::f64::ANY, 0..6),
            most in 2usize..12,
            decades in any::<bool>(),
        ) {
            let mut spec = AxisSpec::engineering("x", "V");
            if decades {
                spec.spread = Spread::Decades;
            }
            let axis = Axis::fit(&spec, values.iter().copied(), 0.05);
            prop_assert!(axis.low < axis.high);
            let ticks = axis.ticks(most);
            prop_assert!(!ticks.is_empty() && ticks.len() <= most + 2, "{ticks:?}");
            for tick in &ticks {
                let share = axis.share(tick.value).unwrap();
                prop_assert!((-1e-6..=1.0 + 1e-6).contains(&share), "{tick:?} in {axis:?}");
            }
            for pair in ticks.windows(2) {
                prop_assert_ne!(&pair[0].text, &pair[1].text);
            }
            for value in values {
                if let Some(share) = axis.share(value) {
                    prop_assert!(share.is_finite());
                }
            }
        }
    }
}
