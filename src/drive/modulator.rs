//! The supply modulator: converter, filter, slew limit and ripple, in this order.

use std::f64::consts::TAU;

use super::power::PowerModel;
use crate::math::lowpass::Lowpass;
use crate::math::response::{Response, Roots};

/// A supply modulator as the study describes it. What is absent is ideal.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Modulator {
    /// -3 dB bandwidth of its Butterworth response, Hz.
    pub bandwidth_hz: Option<f64>,
    /// Order of that response.
    pub order: u32,
    /// Its response by poles and zeros in place of that.
    pub response: Option<Box<PoleZero>>,
    /// Dead time from the magnitude to the supply, s. The filter's own group delay comes on top.
    pub delay_s: f64,
    /// The fastest the supply can move, V/s, at the output of the filter.
    pub slew_v_per_s: Option<f64>,
    /// A converter that holds quantized values in front of the filter.
    pub converter: Option<Converter>,
    /// What its own switching leaves on the supply.
    pub ripple: Option<Ripple>,
    /// Power out over power in, idle power aside: more than 0 and at most 1.
    pub efficiency: f64,
    /// Power it draws whatever it delivers, W.
    pub idle_w: f64,
    /// How it turns power.
    pub power: PowerModel,
    /// In series with the stage's supply current, ohm.
    pub output_ohm: f64,
}

/// A response by its poles and zeros, rad/s, one of each conjugate pair; 1 at direct current.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PoleZero {
    /// All left of the imaginary axis.
    pub poles: Roots,
    /// At most as many.
    pub zeros: Roots,
}

impl serde::Serialize for PoleZero {
    /// As lists of `[real, imaginary]` part, rad/s.
    fn serialize<S: serde::Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        use serde::ser::SerializeStruct;
        let list = |roots: &Roots| -> Vec<[f64; 2]> {
            let roots = roots.as_slice().iter();
            roots.map(|root| [root.re, root.im]).collect()
        };
        let mut fields = serializer.serialize_struct("PoleZero", 2)?;
        fields.serialize_field("poles_rad_per_s", &list(&self.poles))?;
        fields.serialize_field("zeros_rad_per_s", &list(&self.zeros))?;
        fields.end()
    }
}

/// A digital-to-analogue converter: quantized steps over the full range, held for a sample.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Converter {
    /// Bits over the full range of the supply.
    pub bits: u32,
    /// Samples a second, Hz.
    pub rate_hz: f64,
}

/// A tone on the supply.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Ripple {
    /// Peak, V.
    pub amplitude_v: f64,
    /// Hz
    pub frequency_hz: f64,
}

impl Default for Modulator {
    fn default() -> Self {
        Self {
            bandwidth_hz: None,
            order: 2,
            response: None,
            delay_s: 0.0,
            slew_v_per_s: None,
            converter: None,
            ripple: None,
            efficiency: 1.0,
            idle_w: 0.0,
            power: PowerModel::Switching,
            output_ohm: 0.0,
        }
    }
}

impl Modulator {
    /// The bandwidth that a track must carry, Hz, where there is one.
    pub(super) fn widest_hz(&self) -> Option<f64> {
        let roots = self
            .response
            .as_ref()
            .map(|response| response.poles.fastest().max(response.zeros.fastest()) / TAU);
        roots.or(self.bandwidth_hz)
    }

    /// The bandwidth after whose reciprocal times twelve nothing shows of the start, Hz, where there is one.
    pub(super) fn slowest_hz(&self) -> Option<f64> {
        // e^-20 even of a pole that stands there several times is below 1e-6.
        let roots = self
            .response
            .as_ref()
            .map(|response| 12.0 / 20.0 * response.poles.slowest());
        roots.or(self.bandwidth_hz)
    }
}

/// What shapes the supply.
#[derive(Debug, Clone)]
enum Filter {
    Butterworth(Lowpass<f64>),
    Roots(Response<f64>),
}

impl Filter {
    fn of(settings: &Modulator, rate_hz: f64) -> Option<Self> {
        if let Some(response) = &settings.response {
            let made = Response::new(&response.poles, &response.zeros, rate_hz);
            return Some(Self::Roots(made));
        }
        let bandwidth_hz = settings.bandwidth_hz?;
        Some(Self::Butterworth(Lowpass::new(
            settings.order,
            bandwidth_hz,
            rate_hz,
        )))
    }

    fn settle(&mut self, volt: f64) {
        match self {
            Self::Butterworth(filter) => filter.settle(volt),
            Self::Roots(filter) => filter.settle(volt),
        }
    }

    fn push(&mut self, volt: f64) -> f64 {
        match self {
            Self::Butterworth(filter) => filter.push(volt),
            Self::Roots(filter) => filter.push(volt),
        }
    }

    fn push_held(&mut self, volt: f64) -> f64 {
        match self {
            Self::Butterworth(filter) => filter.push_held(volt),
            Self::Roots(filter) => filter.push_held(volt),
        }
    }
}

/// A modulator at work at one sample rate. The dead time is not here: the drive delays the signal itself.
#[derive(Debug, Clone)]
pub struct SupplyModulator {
    full_v: f64,
    rate_hz: f64,
    settings: Modulator,
    filter: Option<Filter>,
    held: Held,
    /// The supply after the slew limit; absent before the first sample.
    supply_v: Option<f64>,
    clock: u64,
}

/// The state of the converter.
#[derive(Debug, Clone, Copy, Default)]
struct Held {
    value_v: f64,
    /// Number of its last sample.
    tick: u64,
    last_asked_v: f64,
}

impl SupplyModulator {
    /// `settings` at `rate_hz`, for a supply of `full_v`.
    pub fn new(settings: &Modulator, full_v: f64, rate_hz: f64) -> Self {
        Self {
            full_v,
            rate_hz,
            settings: settings.clone(),
            filter: Filter::of(settings, rate_hz),
            held: Held::default(),
            supply_v: None,
            clock: 0,
        }
    }

    /// The supply at the next instant for the asked voltage at that instant, held within 0 and full range.
    pub fn push(&mut self, asked_v: f64) -> f64 {
        let first = self.supply_v.is_none();
        let mut volt = match self.settings.converter {
            Some(converter) => self.convert(converter, asked_v, first),
            None => asked_v,
        };
        if let Some(filter) = &mut self.filter {
            if first {
                filter.settle(volt);
            }
            volt = match self.settings.converter {
                Some(_) => filter.push_held(volt),
                None => filter.push(volt),
            };
        }
        if let (Some(slew), Some(last)) = (self.settings.slew_v_per_s, self.supply_v) {
            let most = slew / self.rate_hz;
            volt = last + (volt - last).clamp(-most, most);
        }
        self.supply_v = Some(volt);
        if let Some(ripple) = self.settings.ripple {
            let cycles = ripple.frequency_hz * self.clock as f64 / self.rate_hz;
            volt += ripple.amplitude_v * (TAU * cycles.fract()).cos();
        }
        self.clock += 1;
        volt.clamp(0.0, self.full_v)
    }

    /// The converter's output averaged over the sample that ends now (so that without a filter behind it, it
    /// lags by half a sample). It samples the asked voltage at its own
    /// ticks, on the straight line between two instants; averaging keeps edges between instants at
    /// their right weight.
    fn convert(&mut self, converter: Converter, asked_v: f64, first: bool) -> f64 {
        let steps = f64::from(2u32).powi(converter.bits as i32) - 1.0;
        let quantize = |volt: f64| {
            ((volt / self.full_v).clamp(0.0, 1.0) * steps).round() / steps * self.full_v
        };
        let ticks_per_sample = converter.rate_hz / self.rate_hz;
        let held = &mut self.held;
        if first {
            *held = Held {
                value_v: quantize(asked_v),
                tick: 0,
                last_asked_v: asked_v,
            };
            return held.value_v;
        }
        let (from, to) = (
            (self.clock - 1) as f64 * ticks_per_sample,
            self.clock as f64 * ticks_per_sample,
        );
        let (mut sum, mut at) = (0.0, from);
        while ((held.tick + 1) as f64) <= to {
            let tick = (held.tick + 1) as f64;
            sum += (tick - at) * held.value_v;
            let fraction = ((tick - from) / ticks_per_sample).clamp(0.0, 1.0);
            held.value_v = quantize(held.last_asked_v + fraction * (asked_v - held.last_asked_v));
            held.tick += 1;
            at = tick;
        }
        sum += (to - at) * held.value_v;
        held.last_asked_v = asked_v;
        sum / ticks_per_sample
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_ideal_modulator_passes_the_supply_through() {
        let mut modulator = SupplyModulator::new(&Modulator::default(), 6.0, 1e6);
        for asked in [0.0, 3.0, 6.0, 1.5] {
            assert_eq!(modulator.push(asked), asked);
        }
        assert_eq!(modulator.push(7.0), 6.0);
    }

    #[test]
    fn the_slew_limit_is_a_straight_ramp() {
        let settings = Modulator {
            slew_v_per_s: Some(1e6),
            ..Modulator::default()
        };
        let mut modulator = SupplyModulator::new(&settings, 6.0, 1e6);
        modulator.push(0.0);
        for expected in [1.0, 2.0, 3.0, 4.0, 4.5, 4.5] {
            assert!((modulator.push(4.5) - expected).abs() < 1e-12);
        }
    }

    #[test]
    fn the_converter_keeps_the_mean_and_its_steps() {
        // Two bits over 3 V: 0, 1, 2, 3. A slow ramp spends equal times on the inner steps.
        let converter = Some(Converter {
            bits: 2,
            rate_hz: 12_345.0,
        });
        let settings = Modulator {
            converter,
            ..Modulator::default()
        };
        let mut modulator = SupplyModulator::new(&settings, 3.0, 100_000.0);
        let (mut on_step, mut total) = (0, 0);
        for n in 0..300_000 {
            let volt = modulator.push(3.0 * f64::from(n) / 300_000.0);
            total += 1;
            on_step += i32::from((volt - volt.round()).abs() < 1e-9);
        }
        // Only instants within one sample of a change may lie between steps; the rest is on them up to the
        // rounding of averages over a clock of 300,000.
        assert!(on_step >= total - 4, "{on_step} of {total}");
    }

    #[test]
    fn ripple_has_its_peak_and_frequency() {
        let ripple = Some(Ripple {
            amplitude_v: 0.02,
            frequency_hz: 125e3,
        });
        let settings = Modulator {
            ripple,
            ..Modulator::default()
        };
        let mut modulator = SupplyModulator::new(&settings, 6.0, 1e6);
        let volts: Vec<f64> = (0..8).map(|_| modulator.push(3.0)).collect();
        for (n, volt) in volts.iter().enumerate() {
            let expected = 3.0 + 0.02 * (TAU * n as f64 / 8.0).cos();
            assert!((volt - expected).abs() < 1e-12);
        }
    }
}
