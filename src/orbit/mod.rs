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
mod equations;
mod factors;
mod figures;
mod gated;
mod gather;
mod gating;
mod joined;
mod linear;
mod network;
mod period;
mod plan;
mod port;
mod reduce;
mod schedule;
mod shooting;
mod sized;
mod step;
mod tracker;
mod unit;
mod waveform;

pub use balance::{Losses, Orbit, SwitchFigures};
pub(crate) use circuit::Owner;
pub use gating::{Decay, Gating, TransitionArea};
pub use joined::{Compensation, Joined, Joint, JointError, JointKind};
pub use network::{Drive, Network, NetworkError, OrbitError};
pub(crate) use reduce::Reduced;
pub use tracker::Tracker;
pub use waveform::{OtherSwitch, Waveform};
