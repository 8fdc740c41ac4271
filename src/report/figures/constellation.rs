//! Received points of a constellation, and where the sent ones are.

use num_complex::Complex64;

use super::CloudFigure;
use crate::report::palette::Role;
use crate::report::picture::{AxisSpec, Chart, Curve, Dash, Figure, Panel};

/// Half the size of the cross at a sent point.
const CROSS: f64 = 0.03;

/// Received points over their gain, as a density.
#[derive(Debug, Clone, Default)]
pub struct ConstellationFigure {
    /// What is shown.
    pub title: String,
    /// Received points.
    pub received: Vec<Complex64>,
    /// Points that are sent.
    pub sent: Vec<Complex64>,
}

impl ConstellationFigure {
    /// Draws it: the darker, the more points; a cross at each sent one.
    pub fn figure(&self) -> Figure {
        let reach = self
            .received
            .iter()
            .chain(&self.sent)
            .map(|z| z.re.abs().max(z.im.abs()))
            .filter(|reach| reach.is_finite())
            .fold(1.0, f64::max)
            .min(4.0)
            * 1.05;
        let cloud = CloudFigure {
            samples: self.received.iter().map(|z| (z.re, z.im)).collect(),
            ..CloudFigure::default()
        };
        let mut up = AxisSpec::plain("quadrature", "");
        up.range = Some((-reach, reach));
        let mut panel = Panel::new(up, 420.0);
        panel.cells = cloud.cells();
        panel.cells_name = "received, darker where more".to_owned();
        let mut crosses = Vec::new();
        for point in &self.sent {
            let gap = (f64::NAN, f64::NAN);
            crosses.extend([
                (point.re - CROSS, point.im),
                (point.re + CROSS, point.im),
                gap,
                (point.re, point.im - CROSS),
                (point.re, point.im + CROSS),
                gap,
            ]);
        }
        let mut curve = Curve::numbered(1, "sent", crosses);
        (curve.role, curve.width, curve.dash) = (Role::Second, 1.6, Dash::Solid);
        panel.curves.push(curve);
        let mut across = AxisSpec::plain("in phase", "");
        across.range = Some((-reach, reach));
        let description = format!(
            "{}: density of {} received points, {} sent ones marked.",
            self.title,
            self.received.len(),
            self.sent.len()
        );
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
}
