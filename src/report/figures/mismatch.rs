//! What a mismatched load does to the stage, over the angle of its reflection coefficient.

use super::{highest, pairs};
use crate::report::palette::Role;
use crate::report::picture::{AxisSpec, Chart, Curve, Dash, Figure, Mark, Panel};
use crate::report::text::quantity;

/// The stage over the angle of its load; values that are not finite break the curves.
#[derive(Debug, Clone, Default)]
pub struct MismatchFigure {
    /// What is shown.
    pub title: String,
    /// Angles, degrees, rising.
    pub angle_deg: Vec<f64>,
    /// Power in the load at each angle, W.
    pub output_w: Vec<f64>,
    /// Efficiency, 0 to 1.
    pub efficiency: Vec<f64>,
    /// Highest drain voltage, V.
    pub switch_peak_v: Vec<f64>,
    /// Highest switch current, A.
    pub switch_peak_a: Vec<f64>,
    /// Power, efficiency, peak voltage and peak current at the matched load.
    pub matched: Option<[f64; 4]>,
    /// What the switch may stand, V.
    pub rating_v: Option<f64>,
    /// What the switch may stand, A.
    pub rating_a: Option<f64>,
}

/// Picks the point that a panel marks.
type Extreme = fn(&[(f64, f64)]) -> Option<(f64, f64)>;

fn lowest(points: &[(f64, f64)]) -> Option<(f64, f64)> {
    let turned: Vec<(f64, f64)> = points.iter().map(|&(x, y)| (x, -y)).collect();
    highest(&turned).map(|(x, y)| (x, -y))
}

impl MismatchFigure {
    /// Over the angle: power, efficiency and peaks, the worst of each marked.
    pub fn figure(&self) -> Figure {
        let ends = self.ends();
        let percent: Vec<f64> = self.efficiency.iter().map(|share| 100.0 * share).collect();
        let matched = self.matched.unwrap_or([f64::NAN; 4]);
        let panel = |index: usize,
                     up: AxisSpec,
                     values: &[f64],
                     matched: f64,
                     rating: Option<f64>,
                     worst: Extreme,
                     words: (&str, &str)| {
            let mut panel = Panel::new(up, 118.0);
            let points = pairs(&self.angle_deg, values);
            let worst = worst(&points);
            let mut curve = Curve::numbered(0, "", points);
            curve.role = Role::curve(index);
            panel.curves.push(curve);
            if matched.is_finite() {
                let line = vec![(ends.0, matched), (ends.1, matched)];
                let mut curve = Curve::numbered(1, "matched load", line);
                (curve.role, curve.width, curve.dash) = (Role::Muted, 1.2, Dash::Long);
                panel.curves.push(curve);
            }
            if let Some(rating) = rating {
                let line = vec![(ends.0, rating), (ends.1, rating)];
                panel.curves.push(Curve::limit("rating", line));
            }
            if let Some(at) = worst {
                panel.marks.push(Mark {
                    at,
                    text: format!("{} {}", words.0, quantity(at.1, words.1, 3)),
                    role: Role::curve(index),
                });
            }
            panel
        };
        let panels = vec![
            panel(
                0,
                AxisSpec::engineering("power in the load", "W"),
                &self.output_w,
                matched[0],
                None,
                lowest,
                ("lowest", "W"),
            ),
            panel(
                3,
                AxisSpec::plain("efficiency", "%"),
                &percent,
                100.0 * matched[1],
                None,
                lowest,
                ("lowest", "%"),
            ),
            panel(
                2,
                AxisSpec::engineering("peak drain voltage", "V"),
                &self.switch_peak_v,
                matched[2],
                self.rating_v,
                highest,
                ("highest", "V"),
            ),
            panel(
                1,
                AxisSpec::engineering("peak switch current", "A"),
                &self.switch_peak_a,
                matched[3],
                self.rating_a,
                highest,
                ("highest", "A"),
            ),
        ];
        let mut across = AxisSpec::plain("angle of the reflection coefficient", "deg");
        across.range = Some(ends);
        let chart = Chart {
            title: self.title.clone(),
            across,
            shades: Vec::new(),
            panels,
        };
        Figure::new(
            format!(
                "{}: power, efficiency, peak drain voltage and peak switch current over the angle of the reflection coefficient.",
                self.title
            ),
            chart,
        )
    }

    fn ends(&self) -> (f64, f64) {
        let first = self.angle_deg.first().copied().unwrap_or(0.0);
        let last = self.angle_deg.last().copied().unwrap_or(360.0);
        (first, if last > first { last } else { first + 1.0 })
    }

    /// Around the angle: peak voltage and current over those at the matched load, whose circle is drawn.
    pub fn wheel(&self) -> Figure {
        let matched = self.matched.unwrap_or([f64::NAN; 4]);
        let around = |values: &[f64], one: f64| -> Vec<(f64, f64)> {
            let turned = values.iter().zip(&self.angle_deg);
            turned
                .map(|(value, degrees)| {
                    let (sin, cos) = degrees.to_radians().sin_cos();
                    (value / one * cos, value / one * sin)
                })
                .collect()
        };
        let volts = around(&self.switch_peak_v, matched[2]);
        let amps = around(&self.switch_peak_a, matched[3]);
        let size = |point: &(f64, f64)| point.0.hypot(point.1);
        let ratios = [
            self.rating_v.map(|rating| rating / matched[2]),
            self.rating_a.map(|rating| rating / matched[3]),
        ];
        let largest = volts
            .iter()
            .chain(&amps)
            .map(size)
            .filter(|radius| radius.is_finite())
            .fold(1.0, f64::max);
        // A rating far outside would only shrink the rest.
        let shown = ratios.map(|ratio| ratio.filter(|ratio| *ratio < 1.5 * largest));
        let reach = shown.iter().flatten().copied().fold(largest, f64::max) * 1.12;
        let circle = |radius: f64| -> Vec<(f64, f64)> {
            (0..=120)
                .map(|step| {
                    let (sin, cos) = (f64::from(step) * 3.0).to_radians().sin_cos();
                    (radius * cos, radius * sin)
                })
                .collect()
        };
        let mut up = AxisSpec::plain("radius: peak over that at the matched load", "");
        up.range = Some((-reach, reach));
        let mut panel = Panel::new(up, WHEEL_HEIGHT);
        let mut add = |name: &str, points, role, width, dash, order| {
            let mut curve = Curve::numbered(order, name, points);
            (curve.role, curve.width, curve.dash) = (role, width, dash);
            panel.curves.push(curve);
        };
        for degrees in [0.0f64, 45.0, 90.0, 135.0] {
            let (sin, cos) = degrees.to_radians().sin_cos();
            let spoke = vec![(-reach * cos, -reach * sin), (reach * cos, reach * sin)];
            add("", spoke, Role::Grid, 0.8, Dash::Solid, 9);
        }
        add("matched load", circle(1.0), Role::Muted, 1.2, Dash::Long, 2);
        let names = ["peak drain voltage", "peak switch current"];
        let rating_names = ["rated voltage", "rated current"];
        let styles = [
            (Role::Third, 1.8, Dash::Solid),
            (Role::Second, 1.6, Dash::Short),
        ];
        for (index, mut points) in [volts.clone(), amps.clone()].into_iter().enumerate() {
            let whole = self.angle_deg.len() > 2
                && self.angle_deg[self.angle_deg.len() - 1] - self.angle_deg[0]
                    > 360.0 - 1.5 * (self.angle_deg[1] - self.angle_deg[0]);
            if whole {
                points.extend(points.first().copied());
            }
            let (role, width, dash) = styles[index];
            add(names[index], points, role, width, dash, index);
            if let Some(ratio) = shown[index] {
                add(
                    rating_names[index],
                    circle(ratio),
                    Role::Limit,
                    2.0,
                    dash,
                    index + 3,
                );
            }
        }
        for (index, points) in [volts, amps].iter().enumerate() {
            let worst = points
                .iter()
                .zip(&self.angle_deg)
                .filter(|(point, _)| size(point).is_finite())
                .max_by(|a, b| size(a.0).total_cmp(&size(b.0)));
            if let Some((point, degrees)) = worst {
                let what = ["voltage", "current"][index];
                panel.marks.push(Mark {
                    at: *point,
                    text: format!("{what} {:.2} times at {degrees:.0} deg", size(point)),
                    role: styles[index].0,
                });
            }
        }
        let mut across = AxisSpec::plain(
            "angle: that of the reflection coefficient, 0 to the right, 90 deg upwards",
            "",
        );
        across.range = Some((-reach * WHEEL_ASPECT, reach * WHEEL_ASPECT));
        Figure::new(
            format!(
                "{}: peak drain voltage and switch current around the angle of the reflection coefficient.",
                self.title
            ),
            Chart {
                title: self.title.clone(),
                across,
                shades: Vec::new(),
                panels: vec![panel],
            },
        )
    }
}

/// Height of the wheel's panel, px.
const WHEEL_HEIGHT: f64 = 440.0;

/// Width over height of the panel in a picture of full width, so that circles are round.
const WHEEL_ASPECT: f64 = 1.49;
