//! Numbers without physics.

pub mod delay;
pub mod flow;
pub mod lowpass;
pub mod monotone;
pub mod small;
