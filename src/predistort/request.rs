//! What table is wanted.

use crate::drive::{Between, LookupSize, MAX_TABLE_RATE, Spacing};
use crate::input::{Problem, Range, Section};
use crate::units::Dimension;

/// What the table does where the study's scheme has a floor under the control.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum BelowFloor {
    /// The output follows the scheme's shaping: smooth, as the modulator needs it; only the stage is undone.
    Shaped,
    /// The output is exact down to the floor, where the control is held: accurate, with a corner.
    Held,
}

/// A table to be made.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct TableRequest {
    /// Its sizes.
    pub size: LookupSize,
    /// How addresses are spread.
    pub spacing: Spacing,
    /// What is done between entries.
    pub between: Between,
    /// How often it is applied, in times the signal's rate: a power of two.
    pub rate: usize,
    /// At the floor.
    pub below_floor: BelowFloor,
    /// Output amplitude at address 1, V; the highest that the map's branch reaches where absent.
    pub full_output_v: Option<f64>,
}

impl Default for TableRequest {
    /// 256 entries at 16 times the signal's rate, 12 bits each, straight lines between them.
    fn default() -> Self {
        Self {
            size: LookupSize {
                depth: 256,
                address_bits: 14,
                amplitude_bits: 12,
                phase_bits: 12,
            },
            spacing: Spacing::Magnitude,
            between: Between::Linear,
            rate: 16,
            below_floor: BelowFloor::Shaped,
            full_output_v: None,
        }
    }
}

const SPACINGS: [(&str, Law); 3] = [
    ("magnitude", Law::Magnitude),
    ("power", Law::Power),
    ("companded", Law::Companded),
];

#[derive(Debug, Clone, Copy)]
enum Law {
    Magnitude,
    Power,
    Companded,
}

const BELOW_FLOOR: [(&str, BelowFloor); 2] =
    [("shaped", BelowFloor::Shaped), ("held", BelowFloor::Held)];

/// `mu` where a companded table states none, as in ITU-T G.711.
pub const DEFAULT_MU: f64 = 255.0;

impl TableRequest {
    /// Reads the keys of a study's `[predistort]` table; what is absent is as in [`TableRequest::default`].
    ///
    /// # Errors
    /// The first thing wrong, with its place.
    pub fn read(section: &Section<'_>) -> Result<Self, Problem> {
        let default = Self::default();
        let whole = |key, (low, high): (u64, u64)| section.maybe_whole(key, low, high);
        let bits = (u64::from(LookupSize::BITS.0), u64::from(LookupSize::BITS.1));
        let width = |key, otherwise: u32| {
            whole(key, bits).map(|bits| bits.map_or(otherwise, |bits| bits as u32))
        };
        let depths = (LookupSize::DEPTHS.0 as u64, LookupSize::DEPTHS.1 as u64);
        let law = section.maybe_choice("spacing", &SPACINGS)?;
        let mu = section.maybe_quantity("mu", Dimension::Ratio, Range::Positive)?;
        let spacing = match (law, mu) {
            (None, None) => default.spacing,
            (Some(Law::Companded), mu) => Spacing::Companded {
                mu: mu.unwrap_or(DEFAULT_MU),
            },
            (_, Some(_)) => {
                return Err(section.problem("mu", "mu only beside spacing = \"companded\""));
            }
            (Some(Law::Magnitude), None) => Spacing::Magnitude,
            (Some(Law::Power), None) => Spacing::Power,
        };
        let rate =
            whole("rate", (1, MAX_TABLE_RATE as u64))?.map_or(default.rate, |rate| rate as usize);
        if !rate.is_power_of_two() {
            return Err(section.problem("rate", "a power of two: 1, 2, 4, ... 64"));
        }
        let between = match section.maybe_flag("interpolation")? {
            Some(false) => Between::Nearest,
            _ => Between::Linear,
        };
        let depth = whole("depth", depths)?.map_or(default.size.depth, |depth| depth as usize);
        let request = Self {
            size: LookupSize {
                depth,
                address_bits: width("address_bits", Self::address_bits_for(depth, between))?,
                amplitude_bits: width("amplitude_bits", default.size.amplitude_bits)?,
                phase_bits: width("phase_bits", default.size.phase_bits)?,
            },
            spacing,
            between,
            rate,
            below_floor: section
                .maybe_choice("below_floor", &BELOW_FLOOR)?
                .unwrap_or(default.below_floor),
            full_output_v: section.maybe_quantity(
                "full_output",
                Dimension::Voltage,
                Range::Positive,
            )?,
        };
        Ok(request)
    }

    /// Address bits where none are stated: just enough to name every entry, and 6 more (14 at least) to place
    /// the address between entries.
    pub fn address_bits_for(depth: usize, between: Between) -> u32 {
        let name = depth.max(2).next_power_of_two().trailing_zeros();
        match between {
            Between::Nearest => name,
            Between::Linear => (name + 6).max(14),
        }
    }
}
