//! STEP 6: numbers about the output.

mod align;
mod bend;
mod channel;
mod envelope;
mod evm;
mod lag;
mod memory;
mod occupied;
mod pair;
mod plan;
mod spectrum;
pub mod symbols;
mod sync;
mod welch;

pub use align::{Alignment, AlignmentMeter};
pub use bend::{Bend, BendMeter, BendPoint};
pub use channel::{AdjacentChannel, ChannelFilter, adjacent_channels, channel_power_w};
pub use envelope::{EnvelopeFigures, EnvelopeMeter};
pub use evm::{ErrorFigures, ErrorMeter};
pub use memory::{MemoryCandidate, MemoryFit, MemoryMeter, MemorySize};
pub use occupied::{OccupiedBand, occupied_bandwidth};
pub use pair::PairError;
pub use plan::{Hold, SpectrumPlan};
pub use spectrum::{Spectrum, SpectrumError};
pub use symbols::{SymbolError, SymbolFigures, SymbolFormat, symbol_errors};
pub use sync::{PairReader, Reference, Repeat, Sync, SyncError, synchronize};
pub use welch::SpectrumMeter;
