//! Pictures: what a screen or camera shows, the crystal in its mount, rings over a turn, cuts over wavelength, the
//! phase between the two histories of a pair.

mod camera;
mod contour;
mod cut_curve;
mod drawing;
mod exposure;
mod files;
mod geometry;
mod glow;
mod light;
mod notes;
mod phase;
mod ring_sweep;
mod sensor;
mod sinc;

pub use camera::{Backdrop, camera};
pub use cut_curve::{Curves, CutPoint, cut_curve};
pub use drawing::{Anchor, Drawing, Extent, Pen, escaped};
pub use exposure::{Exposure, Picture};
pub use files::{Depth, png_size};
pub use geometry::{front, side};
pub use glow::{GlowError, Sampling};
pub use light::{Filter, Light, Shape};
pub(crate) use light::{centre as middle, samples};
pub use notes::notes;
pub use phase::{Phases, phase};
pub use ring_sweep::{Axis, parse_axis, ring_sweep};
pub use sensor::{Optics, Seen, Sensor};
