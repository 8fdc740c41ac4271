//! Numbers without physics.

pub mod fft;
pub mod fir;
pub mod window;

pub use fft::Transform;
pub use window::Window;
