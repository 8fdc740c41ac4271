//! The options of a table.

use crate::cli::Failure;
use crate::cli::arguments::quantity;
use crate::drive::{Between, LookupSize, MAX_TABLE_RATE, Spacing};
use crate::predistort::{BelowFloor, DEFAULT_MU, TableRequest};
use crate::units::Dimension;

#[derive(Debug, clap::Args)]
pub(super) struct TableOptions {
    /// Entries, 2 to 65536 [default: 256]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u32).range(LookupSize::DEPTHS.0 as i64..=LookupSize::DEPTHS.1 as i64))]
    depth: Option<u32>,

    /// Bits of the address [default: enough to name the entries, 6 more and at least 14 with interpolation]
    #[arg(long, value_name = "BITS", value_parser = bits())]
    address_bits: Option<u32>,

    /// Bits of the control's words [default: 12]
    #[arg(long, value_name = "BITS", value_parser = bits())]
    amplitude_bits: Option<u32>,

    /// Bits of the phase's words, over one turn [default: 12]
    #[arg(long, value_name = "BITS", value_parser = bits())]
    phase_bits: Option<u32>,

    /// How the addresses are spread
    #[arg(long, value_enum)]
    spacing: Option<SpacingWord>,

    /// Parameter of the companding p = ln(1 + mu m) / ln(1 + mu) [default: 255]
    #[arg(long, value_name = "MU")]
    mu: Option<f64>,

    /// The nearest entry counts; without this, straight lines between entries
    #[arg(long)]
    no_interpolation: bool,

    /// Rate of table and polynomial in times the signal's: 1, 2, 4, ... 64 [default: 16]
    #[arg(long, value_name = "TIMES")]
    rate: Option<usize>,

    /// Where the scheme has a floor: follow its shaping, or be exact down to the floor and held there
    #[arg(long, value_enum)]
    below_floor: Option<BelowFloorWord>,

    /// Output amplitude at the last entry, peak volts [default: the highest the map reaches]
    #[arg(long, value_name = "VOLTS", value_parser = quantity(Dimension::Voltage))]
    full_output: Option<f64>,
}

fn bits() -> clap::builder::RangedI64ValueParser<u32> {
    clap::value_parser!(u32).range(i64::from(LookupSize::BITS.0)..=i64::from(LookupSize::BITS.1))
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
enum SpacingWord {
    /// Evenly in magnitude
    Magnitude,
    /// Evenly in power
    Power,
    /// Dense at the bottom, by the mu-law
    Companded,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
enum BelowFloorWord {
    /// Follow the scheme's shaping
    Shaped,
    /// Exact down to the floor
    Held,
}

impl TableOptions {
    /// The table of `base` with what the options say.
    pub(super) fn request(&self, base: TableRequest) -> Result<TableRequest, Failure> {
        let options = self;
        let mut request = base;
        if options.no_interpolation {
            request.between = Between::Nearest;
        }
        if let Some(depth) = options.depth {
            request.size.depth = depth as usize;
        }
        request.size.address_bits = match options.address_bits {
            Some(bits) => bits,
            // The study's own stay where nothing that they hang on was changed.
            None if options.depth.is_none() && !options.no_interpolation => base.size.address_bits,
            None => TableRequest::address_bits_for(request.size.depth, request.between),
        };
        request.size.amplitude_bits = options.amplitude_bits.unwrap_or(base.size.amplitude_bits);
        request.size.phase_bits = options.phase_bits.unwrap_or(base.size.phase_bits);
        request.spacing = match (options.spacing, options.mu) {
            (None, None) => base.spacing,
            (Some(SpacingWord::Companded), mu) => Spacing::Companded {
                mu: mu.unwrap_or(DEFAULT_MU),
            },
            (Some(SpacingWord::Magnitude), None) => Spacing::Magnitude,
            (Some(SpacingWord::Power), None) => Spacing::Power,
            (_, Some(mu)) => {
                return Err(Failure::new(format!(
                    "--mu {mu}: only beside --spacing companded"
                )));
            }
        };
        if let Some(rate) = options.rate {
            if !rate.is_power_of_two() || rate > MAX_TABLE_RATE {
                return Err(Failure::new(format!(
                    "--rate {rate}: a power of two up to {MAX_TABLE_RATE} is allowed"
                )));
            }
            request.rate = rate;
        }
        request.below_floor = match options.below_floor {
            None => base.below_floor,
            Some(BelowFloorWord::Shaped) => BelowFloor::Shaped,
            Some(BelowFloorWord::Held) => BelowFloor::Held,
        };
        if let Some(full_output_v) = options.full_output {
            if full_output_v <= 0.0 {
                return Err(Failure::new("--full-output: more than 0 V is allowed"));
            }
            request.full_output_v = Some(full_output_v);
        }
        Ok(request)
    }
}
