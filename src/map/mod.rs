//! STEP 3: from a control to the output, forward and inverse: AM-AM and AM-PM.

mod angle;
mod mismatch;
mod planes;
mod read;
mod read_csv;
mod read_json;
mod sweep;

use num_complex::Complex64;

use crate::math::monotone::{Curve, CurveError};
use crate::orbit::Gating;
use crate::units;

pub use angle::AngleSweep;
pub use mismatch::{LoadMap, LoadPoint, LoadSweep, LoadSweepError};
pub use read::{MapFacts, MapFormat, read_map};
pub use sweep::{Sweep, SweepError};

/// What is moved.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Control {
    /// Supply voltage, V.
    Supply,
    /// Closed fraction of the period.
    Width,
    /// Wanted amplitude over the full one: the control of stages whose output is a straight line of it.
    Drive,
    /// Half the angle between two joined stages, rad: the first ahead, the second behind.
    Angle,
}

impl Control {
    /// The unit of its values, empty for a fraction.
    pub fn unit(self) -> &'static str {
        match self {
            Self::Supply => "V",
            Self::Width | Self::Drive => "",
            Self::Angle => "deg",
        }
    }

    /// `value` in that unit.
    pub fn shown(self, value: f64) -> f64 {
        match self {
            Self::Angle => value.to_degrees(),
            Self::Supply | Self::Width | Self::Drive => value,
        }
    }

    /// `value` in words, to `digits` figures; angles to a hundredth of a degree.
    pub fn show(self, value: f64, digits: usize) -> String {
        match self {
            Self::Angle => format!("{:.2} deg", value.to_degrees()),
            Self::Supply | Self::Width | Self::Drive => units::show(value, self.unit(), digits),
        }
    }

    /// Its name in files and on the command line.
    pub fn name(self) -> &'static str {
        match self {
            Self::Supply => "supply",
            Self::Width => "width",
            Self::Drive => "drive",
            Self::Angle => "angle",
        }
    }
}

/// The stage at one value of the control. What a measured map does not know is absent.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct MapPoint {
    /// V for supply, a fraction for width, rad for angle.
    pub control: f64,
    /// Phasor of the output, peak volts across the load resistance.
    pub output_v: Complex64,
    /// Supply, V.
    pub supply_v: f64,
    /// Mean supply current, A.
    pub supply_a: Option<f64>,
    /// Output power over supply and driver power.
    pub efficiency: Option<f64>,
    /// Highest drain voltage, V.
    pub switch_peak_v: Option<f64>,
    /// Highest switch current, A.
    pub switch_peak_a: Option<f64>,
    /// Lowest drain voltage, V.
    pub switch_min_v: Option<f64>,
    /// Drain voltage just before the switch closes, V.
    pub closing_v: Option<f64>,
    /// Power that the driver draws, W.
    pub driver_w: Option<f64>,
}

/// A control at which the stage has no known orbit.
#[derive(Debug, Clone, PartialEq, serde::Serialize, serde::Deserialize)]
pub struct Failure {
    /// V for supply, a fraction for width.
    pub control: f64,
    /// Why.
    pub reason: String,
}

/// Where a map came from.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Origin {
    /// Solved from a stage: stress and replay can be asked.
    Stage,
    /// Read from a file: only what the file holds is known.
    File,
}

/// Output over a control, as curves that pass through every point and never leave their domain.
#[derive(Debug, Clone)]
pub struct Map {
    control: Control,
    origin: Origin,
    frequency_hz: f64,
    load_ohm: f64,
    points: Vec<MapPoint>,
    amplitude_v: Curve,
    phase_rad: Curve,
    /// Real and imaginary part of the output where it passes near zero, as it does over an angle.
    parts_v: Option<[Curve; 2]>,
    supply_a: Option<Curve>,
    switch_peak_v: Option<Curve>,
    switch_peak_a: Option<Curve>,
    driver_w: Option<Curve>,
    failures: Vec<Failure>,
    /// Between the points beside failed ones: nothing is known inside.
    gaps: Vec<(f64, f64)>,
    /// How the stage answers its gate at full control, where it is gated.
    gating: Option<Gating>,
    /// What the stages generate in front of a combiner, W, where that is not the output.
    generated_w: Option<f64>,
    /// A width map at lower supplies, rising; empty where it scales.
    planes: Vec<Map>,
    /// What a front end knows of the hardware, where the hardware is another.
    nominal: Option<Box<Map>>,
}

/// Why points make no map.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum MapError {
    /// The points make no curve.
    #[error("the map: {0}")]
    Curve(#[from] CurveError),
    /// Every output is zero.
    #[error("the map: the output is zero at every point")]
    Silent,
}

impl Map {
    /// A map through `points`, sorted by strictly increasing control.
    ///
    /// The phase at a point without output is that of its nearest neighbour with output: a straight supply map
    /// passes through zero without a kink.
    ///
    /// # Errors
    /// [`MapError`].
    pub fn new(
        control: Control,
        origin: Origin,
        frequency_hz: f64,
        load_ohm: f64,
        points: Vec<MapPoint>,
    ) -> Result<Self, MapError> {
        let x: Vec<f64> = points.iter().map(|point| point.control).collect();
        let amplitude: Vec<f64> = points.iter().map(|point| point.output_v.norm()).collect();
        let phase = unwrapped(&points, &amplitude)?;
        let optional = |value: fn(&MapPoint) -> Option<f64>| {
            let values: Option<Vec<f64>> = points.iter().map(value).collect();
            values
                .map(|values| Curve::new(x.clone(), values))
                .transpose()
        };
        Ok(Self {
            control,
            origin,
            frequency_hz,
            load_ohm,
            amplitude_v: Curve::new(x.clone(), amplitude)?,
            phase_rad: Curve::new(x.clone(), phase)?,
            parts_v: match control {
                Control::Angle => {
                    let part = |value: fn(&MapPoint) -> f64| {
                        Curve::new(x.clone(), points.iter().map(value).collect())
                    };
                    Some([
                        part(|point| point.output_v.re)?,
                        part(|point| point.output_v.im)?,
                    ])
                }
                _ => None,
            },
            supply_a: optional(|point| point.supply_a)?,
            switch_peak_v: optional(|point| point.switch_peak_v)?,
            switch_peak_a: optional(|point| point.switch_peak_a)?,
            driver_w: optional(|point| point.driver_w)?,
            failures: Vec::new(),
            gaps: Vec::new(),
            gating: None,
            generated_w: None,
            planes: Vec::new(),
            nominal: None,
            points,
        })
    }

    /// The same map behind a combiner into which the stages deliver `watt` whatever comes out of it.
    #[must_use]
    pub fn with_generated_w(mut self, watt: f64) -> Self {
        self.generated_w = Some(watt);
        self
    }

    /// The same map of hardware with mismatch, for a front end that knows only `nominal`.
    #[must_use]
    pub fn with_nominal(mut self, nominal: Self) -> Self {
        self.nominal = Some(Box::new(nominal));
        self
    }

    /// The map that the front end knows.
    pub fn known(&self) -> &Self {
        self.nominal.as_deref().unwrap_or(self)
    }

    /// What the stages deliver into a combiner, W; none where they deliver the output itself.
    pub fn generated_w(&self) -> Option<f64> {
        self.generated_w
    }

    /// The same map with points that failed. Between their neighbours nothing is interpolated: forward and
    /// inverse have no answer there.
    #[must_use]
    pub fn with_failures(mut self, mut failures: Vec<Failure>) -> Self {
        failures.sort_by(|a, b| a.control.total_cmp(&b.control));
        let mut gaps: Vec<(f64, f64)> = Vec::new();
        for failure in &failures {
            let after = self
                .points
                .partition_point(|point| point.control < failure.control);
            // Failures outside the points only shorten the domain.
            if after > 0 && after < self.points.len() {
                let gap = (self.points[after - 1].control, self.points[after].control);
                if gaps.last() != Some(&gap) {
                    gaps.push(gap);
                }
            }
        }
        self.failures = failures;
        self.gaps = gaps;
        self
    }

    /// The same map of a stage that answers its gate so.
    #[must_use]
    pub fn with_gating(mut self, gating: Gating) -> Self {
        self.gating = Some(gating);
        self
    }

    /// How the stage answers its gate at full control, where it is gated.
    pub fn gating(&self) -> Option<&Gating> {
        self.gating.as_ref()
    }

    /// Points that failed, by control.
    pub fn failures(&self) -> &[Failure] {
        &self.failures
    }

    /// The end of a gap nearest to `control`, where it lies in one.
    fn gap_edge(&self, control: f64) -> Option<f64> {
        self.gaps
            .iter()
            .find(|(low, high)| *low < control && control < *high)
            .map(|(low, high)| {
                if control - low < high - control {
                    *low
                } else {
                    *high
                }
            })
    }

    /// What is moved.
    pub fn control(&self) -> Control {
        self.control
    }

    /// Where the map came from.
    pub fn origin(&self) -> Origin {
        self.origin
    }

    /// Carrier, Hz.
    pub fn frequency_hz(&self) -> f64 {
        self.frequency_hz
    }

    /// Load resistance, ohm.
    pub fn load_ohm(&self) -> f64 {
        self.load_ohm
    }

    /// The points it passes through.
    pub fn points(&self) -> &[MapPoint] {
        &self.points
    }

    /// Lowest and highest control.
    pub fn domain(&self) -> (f64, f64) {
        self.amplitude_v.domain()
    }

    /// The highest output amplitude of all points, V.
    pub fn full_amplitude_v(&self) -> f64 {
        self.points
            .iter()
            .map(|point| point.output_v.norm())
            .fold(0.0, f64::max)
    }

    /// Output phasor at `control`, peak volts; `None` outside the domain and in gaps.
    pub fn output_v(&self, control: f64) -> Option<Complex64> {
        if self.gap_edge(control).is_some() {
            return None;
        }
        Some(Complex64::from_polar(
            self.amplitude_v.at(control)?,
            self.phase_rad.at(control)?,
        ))
    }

    /// Output phase at `control`, rad, without jumps of a turn; `None` outside the domain.
    pub fn phase_at_rad(&self, control: f64) -> Option<f64> {
        self.phase_rad.at(control)
    }

    /// The phase of [`Map::output_held_v`], rad, without jumps of a turn.
    pub fn phase_held_rad(&self, control: f64) -> f64 {
        let held = self.gap_edge(control).unwrap_or(control);
        self.phase_rad.at_held(held).0
    }

    /// The magnitude of [`Map::output_held_v`], V.
    pub fn amplitude_held_v(&self, control: f64) -> f64 {
        let held = self.gap_edge(control).unwrap_or(control);
        self.amplitude_v.at_held(held).0
    }

    /// Output phasor at `control` held within the domain and out of gaps, and whether it had to be held.
    pub fn output_held_v(&self, control: f64) -> (Complex64, bool) {
        if let Some(edge) = self.gap_edge(control) {
            return (self.output_held_v(edge).0, true);
        }
        if let Some([re, im]) = &self.parts_v {
            let (re, held) = re.at_held(control);
            return (Complex64::new(re, im.at_held(control).0), held);
        }
        let (amplitude_v, held) = self.amplitude_v.at_held(control);
        let (phase_rad, _) = self.phase_rad.at_held(control);
        (Complex64::from_polar(amplitude_v, phase_rad), held)
    }

    /// Supply current at `control` held within the domain, A, where the map knows it.
    pub fn supply_held_a(&self, control: f64) -> Option<f64> {
        self.supply_a.as_ref().map(|curve| curve.at_held(control).0)
    }

    /// Supply current over the control, A, where the map knows it.
    pub fn supply_curve_a(&self) -> Option<&Curve> {
        self.supply_a.as_ref()
    }

    /// Driver power at `control` held within the domain, W, where the map knows it.
    pub fn driver_held_w(&self, control: f64) -> Option<f64> {
        self.driver_w.as_ref().map(|curve| curve.at_held(control).0)
    }

    /// Highest drain voltage at `control` held within the domain, V, where the map knows it.
    pub fn switch_peak_held_v(&self, control: f64) -> Option<f64> {
        self.switch_peak_v
            .as_ref()
            .map(|curve| curve.at_held(control).0)
    }

    /// Highest drain voltage, V, and switch current, A, of every control up to `control`, where the map knows both.
    pub fn stress_up_to(&self, control: f64) -> Option<(f64, f64)> {
        let (volts, amps) = (self.switch_peak_v.as_ref()?, self.switch_peak_a.as_ref()?);
        let below = self.points.iter().filter(|point| point.control <= control);
        let at = (volts.at_held(control).0, amps.at_held(control).0);
        Some(below.fold(at, |(volt, amp), point| {
            (
                volt.max(point.switch_peak_v.unwrap_or(volt)),
                amp.max(point.switch_peak_a.unwrap_or(amp)),
            )
        }))
    }

    /// The control that gives `amplitude_v`; `None` outside the range, where the map is not monotone, and where
    /// the control would lie in a gap.
    pub fn inverse(&self, amplitude_v: f64) -> Option<f64> {
        self.amplitude_v
            .inverse(amplitude_v)
            .filter(|&control| self.gap_edge(control).is_none())
    }

    /// The first control from which the amplitude no longer rises, where there is one: the map has no
    /// inverse from there on.
    pub fn turns_at(&self) -> Option<f64> {
        self.points
            .windows(2)
            .find(|pair| pair[1].output_v.norm() <= pair[0].output_v.norm())
            .map(|pair| pair[0].control)
    }

    /// Amplitudes that are reached, and the phase's range over them, for messages: `0 V to 11.2 V`.
    pub fn describe(&self) -> String {
        let (low, high) = self.domain();
        format!(
            "{} {} to {}",
            self.control.name(),
            self.control.show(low, 4),
            self.control.show(high, 4)
        )
    }
}

/// Phases that follow each other within half a turn, from the strongest point outwards.
fn unwrapped(points: &[MapPoint], amplitude: &[f64]) -> Result<Vec<f64>, MapError> {
    let strongest = (0..points.len())
        .max_by(|&a, &b| amplitude[a].total_cmp(&amplitude[b]))
        .unwrap_or(0);
    let full = amplitude.get(strongest).copied().unwrap_or(0.0);
    if full == 0.0 {
        return Err(MapError::Silent);
    }
    let mut phase = vec![0.0; points.len()];
    phase[strongest] = points[strongest].output_v.arg();
    let next = |last: f64, index: usize| {
        // Below 1e-12 of full output the phase is rounding.
        if amplitude[index] <= 1e-12 * full {
            return last;
        }
        let raw = points[index].output_v.arg();
        last + (raw - last + std::f64::consts::PI).rem_euclid(std::f64::consts::TAU)
            - std::f64::consts::PI
    };
    for index in strongest + 1..points.len() {
        phase[index] = next(phase[index - 1], index);
    }
    for index in (0..strongest).rev() {
        phase[index] = next(phase[index + 1], index);
    }
    Ok(phase)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn point(control: f64) -> MapPoint {
        MapPoint {
            control,
            output_v: Complex64::new(2.0 * control, 0.0),
            supply_v: control,
            supply_a: Some(control),
            efficiency: None,
            switch_peak_v: None,
            switch_peak_a: None,
            switch_min_v: None,
            closing_v: None,
            driver_w: Some(0.5),
        }
    }

    #[test]
    fn nothing_is_interpolated_over_failed_points() {
        let failure = |control| Failure {
            control,
            reason: "no orbit".to_owned(),
        };
        // 3 and 4 failed inside, 9 beyond the last point.
        let points = [0.0, 1.0, 2.0, 5.0, 6.0].map(point).to_vec();
        let map = Map::new(Control::Supply, Origin::Stage, 1e6, 50.0, points)
            .unwrap()
            .with_failures(vec![failure(4.0), failure(9.0), failure(3.0)]);
        for control in [2.001, 3.0, 3.7, 4.999] {
            assert_eq!(map.output_v(control), None);
            assert_eq!(map.inverse(2.0 * control), None);
            let (held_v, held) = map.output_held_v(control);
            let edge: f64 = if control < 3.5 { 2.0 } else { 5.0 };
            assert!(held && (held_v.re - 2.0 * edge).abs() < 1e-12);
        }
        for control in [0.5, 2.0, 5.0, 5.5] {
            assert!((map.output_v(control).unwrap().re - 2.0 * control).abs() < 1e-12);
            assert!((map.inverse(2.0 * control).unwrap() - control).abs() < 1e-12);
            assert!(!map.output_held_v(control).1);
        }
        assert_eq!(map.output_v(9.0), None);
        let order: Vec<f64> = map.failures().iter().map(|f| f.control).collect();
        assert_eq!(order, [3.0, 4.0, 9.0]);
    }
}
