//! Pictures: what a screen or camera shows.

mod exposure;
mod glow;
mod light;
mod sensor;
mod sinc;

pub use exposure::{Exposure, Picture};
pub use glow::{GlowError, Sampling};
pub use light::{Filter, Light, Shape};
pub use sensor::{Optics, Seen, Sensor};
