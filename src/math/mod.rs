//! Numbers without physics.

pub mod delay;
pub mod edges;
pub mod fft;
pub mod fir;
pub mod flow;
pub mod kernel;
pub mod least_squares;
pub mod lowpass;
pub mod modal;
pub mod monotone;
pub mod newton;
pub mod radau;
pub mod response;
mod section;
pub mod simplex;
pub mod small;
pub mod window;

pub use fft::Transform;
pub use window::Window;
