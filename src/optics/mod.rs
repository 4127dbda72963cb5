//! Plane waves in anisotropic crystals: indices along a direction, and waves at a given tangential wave vector.

mod along;
mod crystal;
mod index;
mod indices;
mod medium;
mod retardation;
mod surface;

pub use along::{Along, along_axes, along_direction};
pub use crystal::Crystal;
pub use index::{IndexRow, index_rows, missing};
pub use indices::Indices;
pub use medium::{Drift, Medium, Polarization, Tangent, Wave};
pub use retardation::retardation;
pub(crate) use surface::Quadric;
pub use surface::{Curvature, Normal, Sheet, Surface};
