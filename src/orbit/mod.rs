//! STEP 2: what the stage does every period: its periodic steady state.

mod balance;
mod circuit;
mod linear;
mod network;
mod reduce;
mod waveform;

pub use balance::{Losses, Orbit};
pub use network::{Drive, Network, NetworkError, OrbitError};
pub use waveform::Waveform;
