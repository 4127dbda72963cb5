//! Pictures: what a screen or camera shows, the crystal in its mount, rings over a turn, cuts over wavelength, the
//! phase between the two histories of a pair.

mod camera;
mod contour;
mod cut_curve;
mod drawing;
mod exposure;
mod fewest;
mod files;
mod front;
mod glow;
mod light;
mod notes;
mod phase;
mod pump_light;
mod ring_sweep;
mod sensor;
mod side;
mod sinc;
mod standing;
mod width;

pub use camera::{Backdrop, camera};
pub use cut_curve::{Curves, CutPoint, cut_curve};
pub use drawing::{Anchor, Drawing, Extent, Pen, escaped};
pub use exposure::{Exposure, Picture};
pub use files::{Depth, png_size};
pub use front::{front, front_of};
pub use glow::{GlowError, Sampling};
pub use light::{Filter, Light, Shape};
pub(crate) use light::{centre as middle, samples};
pub use notes::notes;
pub use phase::{Phases, phase};
pub use pump_light::{PumpLight, taken};
pub use ring_sweep::{Axis, parse_axis, ring_sweep};
pub use sensor::{Optics, Seen, Sensor};
pub use side::{line_up, side, side_of};
pub(crate) use standing::{gap_words, reversed};
pub use width::ring_widths;
