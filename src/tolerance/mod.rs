//! What errors of cut, wavelength, temperature and mounting do to a geometry, and whether turning repairs it.
//!
//! Everything is computed on the exact geometry at the ends of each error ([`contributions`]) or at many random
//! combinations of all of them ([`sample`]); nothing is a derivative times an error, since near collinear a cone grows as
//! a square root.

mod advice;
mod bench;
mod contribution;
mod errors;
mod samples;

pub use advice::{Advice, advise, ordered_otherwise};
pub use bench::{Bench, RingPlace, Seen};
pub use contribution::{Contribution, End, Moved, Origin, Shift, contributions};
pub use errors::{CAUSES, Cause, Errors};
pub use samples::{Chances, Draw, Sample, Spread, chances, sample};
