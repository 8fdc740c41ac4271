//! Shape-keeping cubic interpolation with an explicit domain.
//!
//! F. N. Fritsch, J. Butland, "A method for constructing local monotone piecewise cubic
//! interpolants", SIAM J. Sci. Stat. Comput. 5 (1984): between two points the curve stays between
//! them where the data are monotone, and it passes through every point.

/// A curve through points with strictly increasing abscissae.
#[derive(Debug, Clone, PartialEq)]
pub struct Curve {
    x: Vec<f64>,
    y: Vec<f64>,
    /// The cubic over each piece.
    cubics: Vec<Cubic>,
    /// Distance of the abscissae where they are evenly spaced: their piece is found without a search.
    step: Option<f64>,
}

/// `start + t (first + t (second + t third))` over `t` from 0 to 1.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Cubic {
    left: f64,
    width: f64,
    start: f64,
    first: f64,
    second: f64,
    third: f64,
}

/// Why points make no curve.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum CurveError {
    /// Fewer than two points, or unequal numbers of abscissae and ordinates.
    #[error("{0} points make no curve: at least 2 are needed")]
    TooFew(usize),
    /// An abscissa that is not greater than the one before it, or a number that is not finite.
    #[error("point {index} ({x}, {y}) must be finite and lie to the right of the one before it")]
    NotIncreasing {
        /// From 1.
        index: usize,
        /// Abscissa.
        x: f64,
        /// Ordinate.
        y: f64,
    },
}

impl Curve {
    /// The curve through `(x[i], y[i])`.
    ///
    /// # Errors
    /// [`CurveError`].
    pub fn new(x: Vec<f64>, y: Vec<f64>) -> Result<Self, CurveError> {
        let count = x.len().min(y.len());
        if count < 2 || x.len() != y.len() {
            return Err(CurveError::TooFew(count));
        }
        for index in 0..count {
            let increasing = index == 0 || x[index] > x[index - 1];
            if !increasing || !x[index].is_finite() || !y[index].is_finite() {
                return Err(CurveError::NotIncreasing {
                    index: index + 1,
                    x: x[index],
                    y: y[index],
                });
            }
        }
        let slope = slopes(&x, &y);
        let cubics = (0..count - 1)
            .map(|piece| {
                let width = x[piece + 1] - x[piece];
                let rise = y[piece + 1] - y[piece];
                let (a, b) = (slope[piece] * width, slope[piece + 1] * width);
                // Hermite form around the left point.
                Cubic {
                    left: x[piece],
                    width,
                    start: y[piece],
                    first: a,
                    second: 3.0 * rise - 2.0 * a - b,
                    third: a + b - 2.0 * rise,
                }
            })
            .collect();
        let step = (x[count - 1] - x[0]) / (count - 1) as f64;
        // Rounding may put x into the piece beside its own: both cubics agree at the shared point.
        let even = (0..count).all(|i| (x[0] + i as f64 * step - x[i]).abs() < 1e-9 * step);
        Ok(Self {
            x,
            y,
            cubics,
            step: even.then_some(step),
        })
    }

    /// Lowest and highest abscissa.
    pub fn domain(&self) -> (f64, f64) {
        (self.x[0], self.x[self.x.len() - 1])
    }

    /// The value at `x`; `None` outside the domain.
    pub fn at(&self, x: f64) -> Option<f64> {
        let (low, high) = self.domain();
        (low <= x && x <= high).then(|| self.inside(x))
    }

    /// The value at `x` held within the domain, and whether it had to be held.
    pub fn at_held(&self, x: f64) -> (f64, bool) {
        let (low, high) = self.domain();
        let held = x.clamp(low, high);
        (self.inside(held), held != x)
    }

    /// The abscissa at which the curve has the value `y`, on a curve whose ordinates strictly rise; `None`
    /// outside its values or where the ordinates do not rise.
    ///
    /// The exact inverse of [`Curve::at`], to rounding: the cubic of the piece is solved by Newton's method
    /// held in a bracket.
    pub fn inverse(&self, y: f64) -> Option<f64> {
        let count = self.y.len();
        if !(self.rises() && self.y[0] <= y && y <= self.y[count - 1]) {
            return None;
        }
        let piece = self.y[1..count - 1].partition_point(|&knot| knot <= y);
        let (mut low, mut high) = (self.x[piece], self.x[piece + 1]);
        let mut x = low + (high - low) * (y - self.y[piece]) / (self.y[piece + 1] - self.y[piece]);
        for _ in 0..80 {
            let (value, slope) = self.piece(piece, x);
            if value == y {
                break;
            }
            if value < y {
                low = x;
            } else {
                high = x;
            }
            let newton = x - (value - y) / slope;
            let next = if newton > low && newton < high {
                newton
            } else {
                0.5 * (low + high)
            };
            if next == x {
                break;
            }
            x = next;
        }
        Some(x)
    }

    /// True where every ordinate is greater than the one before it.
    pub fn rises(&self) -> bool {
        self.y.windows(2).all(|pair| pair[0] < pair[1])
    }

    fn inside(&self, x: f64) -> f64 {
        let last = self.x.len() - 2;
        let piece = match self.step {
            Some(step) => (((x - self.x[0]) / step) as usize).min(last),
            None => self.x[1..=last].partition_point(|&knot| knot <= x),
        };
        self.piece(piece, x).0
    }

    /// The slope at `x` held within the domain.
    pub fn slope_held(&self, x: f64) -> f64 {
        let (low, high) = self.domain();
        let held = x.clamp(low, high);
        let last = self.x.len() - 2;
        let piece = self.x[1..=last].partition_point(|&knot| knot <= held);
        self.piece(piece, held).1
    }

    /// Value and slope at `x` of the cubic over piece `piece`.
    fn piece(&self, piece: usize, x: f64) -> (f64, f64) {
        let cubic = &self.cubics[piece];
        let t = (x - cubic.left) / cubic.width;
        let value = cubic.start + t * (cubic.first + t * (cubic.second + t * cubic.third));
        let slope = cubic.first + t * (2.0 * cubic.second + 3.0 * t * cubic.third);
        (value, slope / cubic.width)
    }
}

/// Slopes at the points: the weighted harmonic mean of the neighbouring chords, zero at a turn; at the ends
/// the one-sided three-point estimate, limited to keep the shape.
pub(crate) fn slopes(x: &[f64], y: &[f64]) -> Vec<f64> {
    let count = x.len();
    let chord = |i: usize| (y[i + 1] - y[i]) / (x[i + 1] - x[i]);
    let width = |i: usize| x[i + 1] - x[i];
    if count == 2 {
        return vec![chord(0); 2];
    }
    let end = |near: f64, far: f64, near_width: f64, far_width: f64| {
        let slope =
            ((2.0 * near_width + far_width) * near - near_width * far) / (near_width + far_width);
        if slope * near <= 0.0 {
            0.0
        } else if near * far <= 0.0 && slope.abs() > 3.0 * near.abs() {
            3.0 * near
        } else {
            slope
        }
    };
    let mut slope = vec![0.0; count];
    slope[0] = end(chord(0), chord(1), width(0), width(1));
    slope[count - 1] = end(
        chord(count - 2),
        chord(count - 3),
        width(count - 2),
        width(count - 3),
    );
    for (i, slope) in slope.iter_mut().enumerate().take(count - 1).skip(1) {
        let (left, right) = (chord(i - 1), chord(i));
        if left * right > 0.0 {
            let (w1, w2) = (2.0 * width(i) + width(i - 1), width(i) + 2.0 * width(i - 1));
            *slope = (w1 + w2) / (w1 / left + w2 / right);
        }
    }
    slope
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn matches_an_outside_implementation() {
        // scipy.interpolate.PchipInterpolator, SciPy 1.17.1:
        // x = [0, 1, 3, 4], y = [0, 2, 3, 10]; at 0.5, 2, 3.5 -> printed digits below.
        let curve = Curve::new(vec![0.0, 1.0, 3.0, 4.0], vec![0.0, 2.0, 3.0, 10.0]).unwrap();
        for (x, expected) in PCHIP_DIGITS {
            let got = curve.at(x).unwrap();
            assert!((got - expected).abs() < 1e-12, "{x}: {got} {expected}");
        }
    }

    const PCHIP_DIGITS: [(f64, f64); 3] = [
        (0.5, 1.2053571428571428),
        (2.0, 2.456088992974239),
        (3.5, 5.483265027322405),
    ];

    #[test]
    fn nothing_outside_the_domain() {
        let curve = Curve::new(vec![0.0, 1.0], vec![5.0, 7.0]).unwrap();
        assert_eq!(curve.at(1.0), Some(7.0));
        assert_eq!(curve.at(1.0 + 1e-12), None);
        assert_eq!(curve.at(f64::NAN), None);
        assert_eq!(curve.at_held(2.0), (7.0, true));
    }

    proptest! {
        #[test]
        fn the_inverse_undoes_the_curve(steps in prop::collection::vec((0.01f64..10.0, 0.001f64..10.0), 2..20), at in 0.0f64..=1.0) {
            let mut point = (-3.0, -5.0);
            let (x, y): (Vec<f64>, Vec<f64>) = steps.iter().map(|step| {
                point = (point.0 + step.0, point.1 + step.1);
                point
            }).unzip();
            let curve = Curve::new(x, y.clone()).unwrap();
            let wanted = y[0] + at * (y[y.len() - 1] - y[0]);
            let x = curve.inverse(wanted).unwrap();
            prop_assert!((curve.at(x).unwrap() - wanted).abs() < 1e-12 * (1.0 + wanted.abs()));
        }

        #[test]
        fn monotone_data_give_a_monotone_curve(steps in prop::collection::vec((0.01f64..10.0, 0.0f64..10.0), 2..20)) {
            let mut point = (0.0, 0.0);
            let (x, y): (Vec<f64>, Vec<f64>) = steps.iter().map(|step| {
                point = (point.0 + step.0, point.1 + step.1);
                point
            }).unzip();
            let curve = Curve::new(x, y).unwrap();
            let (low, high) = curve.domain();
            let mut last = f64::MIN;
            for i in 0..=400 {
                let value = curve.at_held(low + (high - low) * i as f64 / 400.0).0;
                prop_assert!(value >= last - 1e-12 * value.abs());
                last = value;
            }
        }
    }
}
