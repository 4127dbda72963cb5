//! Plane waves in anisotropic crystals: indices along a direction, and waves at a given tangential wave vector.

mod along;
mod crystal;
mod medium;
mod surface;

pub use along::{Along, along_axes, along_direction};
pub use crystal::Crystal;
pub use medium::{Medium, Polarization, Wave};
pub use surface::{Curvature, Normal, Sheet, Surface};
