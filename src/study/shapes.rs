//! The drain's waveform where the signal takes the stage: at the full, half and lowest value of its control.

use std::f64::consts::{FRAC_PI_2, FRAC_PI_4};

use crate::drive::Scheme;
use crate::map::{Control, Map};
use crate::orbit::{Drive, Joined, Network, Waveform};

/// Instants in each position of the switch.
const POINTS: usize = 240;

/// One period at one value of the control.
#[derive(Debug, Clone, PartialEq)]
pub struct Shape {
    /// `full`, `half` or `lowest`.
    pub place: &'static str,
    /// What is moved.
    pub control: Control,
    /// V for supply, a fraction of the period for width.
    pub value: f64,
    /// Supply, V.
    pub supply_v: f64,
    /// The waveform, or why there is none.
    pub waveform: Result<Waveform, String>,
}

/// The waveforms of the stage of `network` over the control of `scheme`. The lowest value is the scheme's floor, or,
/// where it has none, the lowest point of `map` that is more than zero.
pub(super) fn shapes(network: &Network, scheme: &Scheme, map: &Map) -> Vec<Shape> {
    let stage = network.stage();
    let control = scheme.control();
    let full = match control {
        Control::Supply => stage.supply_v,
        Control::Width => stage.driver.duty,
        // The stage itself always works at full supply and width.
        Control::Drive | Control::Angle => return Vec::new(),
    };
    let mut lowest = map
        .points()
        .iter()
        .map(|point| point.control)
        .find(|value| *value > 0.0)
        .unwrap_or(full)
        .max(scheme.floor() * full);
    if let (Control::Width, Scheme::Width(scheme)) = (control, scheme) {
        lowest = lowest.max(scheme.shortest_s * stage.frequency_hz).min(full);
    }
    [("full", full), ("half", 0.5 * full), ("lowest", lowest)]
        .into_iter()
        // Bursts are of full pulses.
        .filter(|(place, _)| *place == "full" || !matches!(scheme, Scheme::Burst(_)))
        .map(|(place, value)| {
            let (supply_v, duty) = match control {
                Control::Supply | Control::Drive | Control::Angle => (value, stage.driver.duty),
                Control::Width => (stage.supply_v, value),
            };
            let drive = Drive::new(&stage.driver, duty);
            Shape {
                place,
                control,
                value,
                supply_v,
                waveform: network
                    .waveform(supply_v, &drive, POINTS)
                    .map_err(|error| error.to_string()),
            }
        })
        .collect()
}

/// The waveforms of the first of two joined stages at full output, at 45 degrees and at a quarter turn.
pub(super) fn joined_shapes(joined: &Joined, full_rad: f64) -> Vec<Shape> {
    let (supply_v, duty) = (joined.stage().supply_v, joined.stage().driver.duty);
    [
        ("full", full_rad),
        ("between", FRAC_PI_4),
        ("lowest", FRAC_PI_2),
    ]
    .into_iter()
    .map(|(place, value)| Shape {
        place,
        control: Control::Angle,
        value,
        supply_v,
        waveform: joined
            .waveform(supply_v, duty, value, POINTS)
            .map_err(|error| error.to_string()),
    })
    .collect()
}
