//! Numbers without physics.

pub mod flow;
pub mod monotone;
pub mod small;
