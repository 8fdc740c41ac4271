//! Numbers without physics.

pub mod delay;
pub mod fft;
pub mod fir;
pub mod flow;
pub mod kernel;
pub mod lowpass;
pub mod monotone;
pub mod small;
pub mod window;

pub use fft::Transform;
pub use window::Window;
