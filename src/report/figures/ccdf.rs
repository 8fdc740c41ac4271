//! CCDF: how often the power exceeds its mean by how much.

use crate::report::palette::Role;
use crate::report::picture::{AxisSpec, Chart, Curve, Dash, Figure, Panel, Spread};

/// Complementary distributions of instantaneous over mean power.
#[derive(Debug, Clone, Default)]
pub struct CcdfFigure {
    /// What is shown.
    pub title: String,
    /// Curves.
    pub curves: Vec<CcdfCurve>,
}

/// One distribution.
#[derive(Debug, Clone, Default)]
pub struct CcdfCurve {
    /// As the legend says it.
    pub name: String,
    /// (dB above mean power, probability from 0 to 1 that the power is higher).
    pub points: Vec<(f64, f64)>,
}

impl CcdfFigure {
    /// Draws it, with the complex Gaussian signal for comparison: `P = exp(-10^(x/10))` at `x` dB above
    /// the mean, because its power is exponentially distributed.
    pub fn figure(&self) -> Figure {
        let mut up = AxisSpec::plain("share of time above", "%");
        up.spread = Spread::Decades;
        up.range = Some((self.lowest_percent(), 100.0));
        let mut panel = Panel::new(up, 240.0);
        for (index, curve) in self.curves.iter().enumerate() {
            let percent = curve
                .points
                .iter()
                .map(|&(db, share)| (db, 100.0 * share))
                .collect();
            panel
                .curves
                .push(Curve::numbered(index, &curve.name, percent));
        }
        let (low, high) = self.range_db();
        let gaussian = (0..=200)
            .map(|step| low + (high - low) * f64::from(step) / 200.0)
            .map(|db| (db, 100.0 * gaussian_ccdf(db)))
            .collect();
        panel.curves.push(Curve {
            role: Role::Muted,
            width: 1.2,
            dash: Dash::Dots,
            legend_order: self.curves.len(),
            ..Curve::numbered(0, "complex Gaussian noise", gaussian)
        });
        let names: Vec<&str> = self
            .curves
            .iter()
            .map(|curve| curve.name.as_str())
            .collect();
        let description = format!(
            "{}: share of time above a power, for {}, beside complex Gaussian noise; {low:.0} to {high:.0} dB \
             above the mean.",
            self.title,
            names.join(", ")
        );
        let mut across = AxisSpec::plain("power above its mean", "dB");
        across.range = Some((low, high));
        Figure::new(
            description,
            Chart {
                title: self.title.clone(),
                across,
                shades: Vec::new(),
                panels: vec![panel],
            },
        )
    }

    /// The lowest decade in percent that a curve reaches, from 1e-4 to 1.
    fn lowest_percent(&self) -> f64 {
        let lowest = self
            .curves
            .iter()
            .flat_map(|curve| curve.points.iter().map(|point| 100.0 * point.1))
            .filter(|percent| *percent > 0.0)
            .fold(1.0, f64::min);
        lowest.max(1e-4)
    }

    /// From the mean, or up to 5 dB below it, to the highest level with a probability above zero.
    fn range_db(&self) -> (f64, f64) {
        let levels: Vec<f64> = self
            .curves
            .iter()
            .flat_map(|curve| curve.points.iter())
            .filter(|point| point.1 > 0.0 && point.0.is_finite())
            .map(|point| point.0.clamp(-5.0, 40.0))
            .collect();
        let low = levels.iter().copied().fold(0.0, f64::min);
        let high = levels.iter().copied().fold(low + 3.0, f64::max);
        (low, high.ceil())
    }
}

/// Probability that complex Gaussian noise exceeds its mean power by `db`.
fn gaussian_ccdf(db: f64) -> f64 {
    (-10f64.powf(db / 10.0)).exp()
}

#[cfg(test)]
mod tests {
    use super::gaussian_ccdf;

    #[test]
    fn the_gaussian_curve_is_the_exponential_law() {
        // SciPy 1.17.1: scipy.stats.expon.sf(10**0.8) prints 0.0018188088961572058. Twelve digits are
        // left to two exponential functions that may round differently.
        assert!((gaussian_ccdf(0.0) - (-1.0f64).exp()).abs() < 1e-15);
        assert!((gaussian_ccdf(8.0) / 0.001_818_808_896_157_205_8 - 1.0).abs() < 1e-12);
    }
}
