//! STEP 2: what the stage does every period: its periodic steady state.

mod balance;
mod charge;
mod circuit;
mod corner;
mod correction;
mod curved;
#[cfg(test)]
mod curved_tests;
mod device;
mod engine;
mod factors;
mod figures;
mod gather;
mod gating;
mod linear;
mod network;
mod period;
mod plan;
mod port;
mod reduce;
mod shooting;
mod step;
mod tracker;
mod waveform;

pub use balance::{Losses, Orbit};
pub use gating::{Decay, Gating, TransitionArea};
pub use network::{Drive, Network, NetworkError, OrbitError};
pub use tracker::Tracker;
pub use waveform::Waveform;
