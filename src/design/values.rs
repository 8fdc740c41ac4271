//! Preferred values of parts, IEC 60063.

/// A series of preferred values.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Series {
    /// 12 a decade.
    E12,
    /// 24 a decade.
    E24,
    /// 96 a decade.
    E96,
}

/// E24 as printed in IEC 60063 (recalled from memory; it does not follow the rounding rule everywhere). E12 is
/// every second value.
const E24: [u32; 24] = [
    10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91,
];

impl Series {
    /// The values of one decade, 1 to below 10.
    fn decade(self) -> Vec<f64> {
        let tens = |step: usize| {
            E24.iter()
                .step_by(step)
                .map(|&v| f64::from(v) / 10.0)
                .collect()
        };
        match self {
            Self::E12 => tens(2),
            Self::E24 => tens(1),
            // E96 follows 10^(i/96) rounded to three digits everywhere.
            Self::E96 => (0..96)
                .map(|i| (10f64.powf(f64::from(i) / 96.0) * 100.0).round() / 100.0)
                .collect(),
        }
    }
}

/// The value of `series` nearest to `value` by ratio; `value` itself where it is not positive.
pub fn rounded(value: f64, series: Series) -> f64 {
    if value.is_nan() || value <= 0.0 || value.is_infinite() {
        return value;
    }
    let exponent = value.log10().floor() as i32;
    let distance = |candidate: f64| (candidate / value).ln().abs();
    (exponent - 1..=exponent + 1)
        .flat_map(|exponent| {
            series.decade().into_iter().map(move |digit| {
                // A parsed decimal is the nearest double to the printed value.
                format!("{digit}e{exponent}")
                    .parse()
                    .unwrap_or(digit * 10f64.powi(exponent))
            })
        })
        .fold(f64::INFINITY, |best: f64, candidate| {
            if distance(candidate) < distance(best) {
                candidate
            } else {
                best
            }
        })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn rounds_to_values_that_are_sold() {
        for (value, series, expected) in [
            (46.2e-12, Series::E12, 47e-12),
            (46.2e-12, Series::E24, 47e-12),
            (46.2e-12, Series::E96, 46.4e-12),
            (9.7e-9, Series::E12, 10e-9),
            (1.04, Series::E24, 1.0),
            (1.06, Series::E24, 1.1),
            (3.01, Series::E96, 3.01),
        ] {
            assert_eq!(rounded(value, series), expected, "{value} {series:?}");
        }
        assert_eq!(rounded(0.0, Series::E12), 0.0);
    }

    #[test]
    fn has_the_right_number_of_rising_values() {
        for (series, count) in [(Series::E12, 12), (Series::E24, 24), (Series::E96, 96)] {
            let decade = series.decade();
            assert_eq!(decade.len(), count);
            assert!(decade.windows(2).all(|pair| pair[0] < pair[1]));
        }
    }
}
